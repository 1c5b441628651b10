"""Coupled dipoles on a small lattice by one dense matrix: slow, plain, and for checking only.

Gaussian units, time factor exp(-i w t), k the wavenumber of the medium. Interaction of the
lattice filtered at k_F = pi / d (Piller & Martin 1998; Gay-Balmaz & Martin 2002) with the
matching polarizability of one cell. Nothing here uses a Fourier transform, a symmetry of the
lattice or a multipole, so it shares no step with the package.

Directions: light comes along `incident`, leaves along `scattered` (unit vectors pointing along
the propagation); polarizations refer to `oracles.mueller.scattering_plane`.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy import linalg
from scipy.integrate import lebedev_rule
from scipy.special import sici

from oracles.mueller import mueller, scattering_plane

NEGATIVE_WEIGHTS = (13, 25, 27)
"""Degrees of Lebedev rules with negative weights."""


def filtered_green(separation, k: float, spacing: float) -> NDArray[np.complex128]:
    """Field of a unit dipole at `separation` (n, 3) from it: complex128 (n, 3, 3).

    G = I (k^2 g + g'/R) + RR (g'' - g'/R) with
    g = {sin kR [pi i + Ci((k_F-k)R) - Ci((k_F+k)R)]
         + cos kR [Si((k_F+k)R) + Si((k_F-k)R)]} / (pi R).
    """
    separation = np.asarray(separation, float)
    r = np.linalg.norm(separation, axis=-1)
    cut = np.pi / spacing
    si_plus, ci_plus = sici((cut + k) * r)
    si_minus, ci_minus = sici((cut - k) * r)
    a = np.pi * 1j + ci_minus - ci_plus
    b = si_plus + si_minus
    sine, cosine = np.sin(k * r), np.cos(k * r)
    # f = r g and its derivatives
    f = (sine * a + cosine * b) / np.pi
    f1 = (k * (cosine * a - sine * b) + 2 * np.sin(cut * r) / r) / np.pi
    f2 = -(k**2) * f + (2 * cut * np.cos(cut * r) / r - 2 * np.sin(cut * r) / r**2) / np.pi
    g = f / r
    g1 = f1 / r - f / r**2
    g2 = f2 / r - 2 * f1 / r**2 + 2 * f / r**3
    unit = separation / r[..., None]
    dyad = unit[..., :, None] * unit[..., None, :]
    isotropic = (k**2 * g + g1 / r)[..., None, None] * np.eye(3)
    return isotropic + (g2 - g1 / r)[..., None, None] * dyad


def on_site(k: float, spacing: float) -> complex:
    """Self term of a filtered cell times its volume: 1/alpha = 1/(V chi) - on_site / V."""
    kd = k * spacing
    radiative = 2 / 3 * (1j + np.log((np.pi - kd) / (np.pi + kd)) / np.pi) * kd**3
    return 4 / 3 * kd**2 + radiative - 4 * np.pi / 3 * np.pi / 6


def cell_permittivity(fill, normal, permittivity: complex) -> NDArray[np.complex128]:
    """Tensor permittivity (n, 3, 3) of cells partly filled, relative to the medium.

    Harmonic mean along the surface normal, arithmetic mean across it (Farjadpour et
    al. 2006, Opt. Lett. 31, 2972); full cells have a zero normal and stay scalar.
    """
    fill, normal = np.asarray(fill), np.asarray(normal)
    across = 1 + fill * (permittivity - 1)
    along = 1 / (1 + fill * (1 / permittivity - 1))
    dyad = normal[:, :, None] * normal[:, None, :]
    return across[:, None, None] * np.eye(3) + (along - across)[:, None, None] * dyad


def cell_polarizability(permittivity, k: float, spacing: float) -> NDArray[np.complex128]:
    """Polarizability (n, 3, 3) of cells of tensor permittivity (n, 3, 3)."""
    susceptibility = (np.asarray(permittivity) - np.eye(3)) * spacing**3 / (4 * np.pi)
    # alpha = (1/(V chi) - s)^-1 = V chi (1 - s V chi)^-1, also where chi = 0
    self_term = on_site(k, spacing) / spacing**3
    return susceptibility @ np.linalg.inv(np.eye(3) - self_term * susceptibility)


@dataclass
class DenseLattice:
    """Dipoles at `position` (n, 3) with polarizability tensors `polarizability` (n, 3, 3).

    Lengths in any one unit, `k` in its inverse. Efficiencies refer to pi `radius`^2.
    """

    position: NDArray[np.float64]
    polarizability: NDArray[np.complex128]
    k: float
    spacing: float
    radius: float = 1.0
    interaction: NDArray[np.complex128] = field(init=False)
    _factors: tuple = field(init=False, repr=False)

    def __post_init__(self) -> None:
        count = len(self.position)
        blocks = np.zeros((count, count, 3, 3), complex)
        for i in range(count):
            others = np.arange(count) != i
            blocks[i, others] = filtered_green(
                self.position[i] - self.position[others], self.k, self.spacing
            )
        self.interaction = blocks.transpose(0, 2, 1, 3).reshape(3 * count, 3 * count)
        scattered = self.polarizability[:, None] @ blocks
        matrix = np.eye(3 * count) - scattered.transpose(0, 2, 1, 3).reshape(3 * count, -1)
        self._factors = linalg.lu_factor(matrix)

    def polarization(self, incident_field) -> NDArray[np.complex128]:
        """Polarizations (n, 3, m) answering m incident fields (n, 3, m) at the cells."""
        source = self.polarizability @ np.asarray(incident_field, complex)
        shape = source.shape
        return linalg.lu_solve(self._factors, source.reshape(3 * shape[0], -1)).reshape(shape)

    def plane_wave(self, direction, polarization) -> NDArray[np.complex128]:
        """Field (n, 3, 1) of a plane wave of unit amplitude, phase 0 at the origin."""
        phase = np.exp(1j * self.k * self.position @ np.asarray(direction, float))
        return (phase[:, None] * np.asarray(polarization))[:, :, None]

    def far_field(self, polarization, scattered) -> NDArray[np.complex128]:
        """F (s, 3, m) in E_sca = F exp(ikr)/(kr) along the unit vectors `scattered` (s, 3)."""
        scattered = np.asarray(scattered, float)
        phase = np.exp(-1j * self.k * scattered @ self.position.T)
        moment = np.tensordot(phase, polarization, 1)
        radial = np.einsum("si,sim->sm", scattered, moment)
        return self.k**3 * (moment - scattered[:, :, None] * radial[:, None, :])

    def cross_sections(self, incident_field, polarization) -> tuple[float, float]:
        """Extinction and absorption efficiency for one incident field of unit amplitude."""
        incident = np.asarray(incident_field).reshape(-1)
        moment = polarization.reshape(-1)
        exciting = incident + self.interaction @ moment
        inside = exciting + on_site(self.k, self.spacing) / self.spacing**3 * moment
        scale = 4 * np.pi * self.k / (np.pi * self.radius**2)
        extinction = scale * np.sum((np.conj(incident) * moment).imag)
        absorption = scale * np.sum((moment * np.conj(inside)).imag)
        return float(extinction), float(absorption)

    def amplitude_matrix(self, incident, scattered) -> NDArray[np.complex128]:
        """S1, S2, S3, S4 (4, s) for unit vectors `scattered` (s, 3), not along `incident`.

        Bohren & Huffman 1983, eq. 3.12: E_s = exp(ikr)/(-ikr) (S2 S3; S4 S1) E_i.
        """
        incident, scattered = np.asarray(incident, float), np.asarray(scattered, float)
        basis, fields = self._two_waves(incident)
        return self._project(incident, scattered, basis, self.polarization(fields))

    def _two_waves(self, incident):
        first = np.cross(incident, np.eye(3)[np.argmin(np.abs(incident))])
        first /= np.linalg.norm(first)
        basis = np.array([first, np.cross(incident, first)])
        return basis, np.concatenate([self.plane_wave(incident, e) for e in basis], axis=2)

    def _project(self, incident, scattered, basis, polarization):
        far = -1j * self.far_field(polarization, scattered)
        perp, par_i, par_s = scattering_plane(incident, scattered)
        # answers to the incident polarizations along e_par and e_perp of each plane
        answer = [np.einsum("sim,sm->si", far, e @ basis.T) for e in (par_i, perp)]
        return np.array(
            [
                np.sum(perp * answer[1], axis=1),
                np.sum(par_s * answer[0], axis=1),
                np.sum(par_s * answer[1], axis=1),
                np.sum(perp * answer[0], axis=1),
            ]
        )

    def random_orientation(self, angles_deg, degree: int, azimuths: int) -> dict:
        """Averages over all orientations with equal weight.

        Incidence by the Lebedev rule of that degree, scattering planes at `azimuths`
        equal steps about each incident direction.

        Returns
        -------
        dict
            extinction_efficiency, absorption_efficiency, and scattering_matrix
            (n_angle, 4, 4), scaled by the scattering efficiency (extinction less
            absorption) so that the mean F11 over the sphere is 1.
        """
        if degree in NEGATIVE_WEIGHTS:
            raise ValueError(f"the Lebedev rule of degree {degree} has negative weights")
        directions, weights = lebedev_rule(degree)
        theta = np.clip(np.radians(np.asarray(angles_deg, float)), 1e-6, np.pi - 1e-6)
        phi = 2 * np.pi * np.arange(azimuths) / azimuths
        total = np.zeros((len(theta), 4, 4))
        extinction = absorption = 0.0
        for incident, weight in zip(directions.T, weights / (4 * np.pi), strict=True):
            basis, fields = self._two_waves(incident)
            moments = self.polarization(fields)
            for column in range(2):
                one = self.cross_sections(fields[:, :, column], moments[:, :, column])
                extinction += 0.5 * weight * one[0]
                absorption += 0.5 * weight * one[1]
            ring = np.cos(phi)[:, None] * basis[0] + np.sin(phi)[:, None] * basis[1]
            scattered = (
                np.cos(theta)[:, None, None] * incident
                + np.sin(theta)[:, None, None] * ring[None, :, :]
            ).reshape(-1, 3)
            matrices = mueller(*self._project(incident, scattered, basis, moments))
            total += weight * matrices.reshape(len(theta), azimuths, 4, 4).mean(axis=1)
        scale = 4 / ((self.k * self.radius) ** 2 * (extinction - absorption))
        return {
            "extinction_efficiency": extinction,
            "absorption_efficiency": absorption,
            "scattering_matrix": total * scale,
        }
