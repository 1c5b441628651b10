"""One plane wave on one lattice: the fields inside, cross sections, amplitudes far away.

The lean way for a few directions of incidence on a particle too large for a complete set of
waves: memory goes with the cells alone.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.mixture import particle_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice
from scatterloom.solve.symmetric import Iterate, solve_symmetric
from scatterloom.transition.far_field import dipole_sums
from scatterloom.waves.parity import images, parity_parts

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Beam:
    """A direction of incidence with its two polarizations.

    Attributes
    ----------
    direction, theta, phi : float64 (3,)
        Unit vectors: of propagation, of growing zenith angle and of growing azimuth.
    """

    direction: Floats
    theta: Floats
    phi: Floats

    @classmethod
    def from_angles(cls, zenith_deg: float, azimuth_deg: float) -> Beam:
        """Direction from its angles in the frame of the lattice."""
        t, p = np.radians(zenith_deg), np.radians(azimuth_deg)
        st, ct, sp, cp = np.sin(t), np.cos(t), np.sin(p), np.cos(p)
        return cls(
            np.array([st * cp, st * sp, ct]),
            np.array([ct * cp, ct * sp, -st]),
            np.array([-sp, cp, 0.0]),
        )


@dataclass(frozen=True)
class WaveResult:
    """One polarization solved.

    Attributes
    ----------
    amplitude : complex128 (n_direction, 3)
        ``(1 - n n) sum p exp(-i n r)``: the scattered field is this times exp(i r)/r in units
        of the incident field and of 1/k.
    extinction, absorption : float [k^-2]
        Cross sections.
    iterate : Iterate
    """

    amplitude: NDArray[np.complex128]
    extinction: float
    absorption: float
    iterate: Iterate


class SingleParticle:
    """A particle on a lattice, ready to be lit by plane waves.

    Parameters
    ----------
    lattice : Lattice
    indices : complex or sequence of complex
        Refractive index of each material relative to the medium, from outside inwards.
    size_parameter : float
        Of the sphere of equal volume.
    dtype : complex64 (default) or complex128
    threads : int
    """

    def __init__(
        self,
        lattice: Lattice,
        indices: complex | Sequence[complex],
        size_parameter: float,
        dtype: type = np.complex64,
        threads: int = 1,
    ) -> None:
        kd = size_parameter * lattice.spacing
        materials = indices if isinstance(indices, Sequence) else [indices]
        tensors = particle_tensors(_fundamental(lattice), materials, kd)
        self.matrix = LatticeMatrix(lattice, tensors, kd, dtype, threads)
        self.lattice = lattice
        self.points = size_parameter * lattice.centre()[self.matrix.fundamental]
        self.signs = images(lattice, self.matrix)
        self.cells = len(lattice.cell)

    def incident(self, beam: Beam, polarization: Floats) -> NDArray:
        """Parts of a plane wave in every parity class, (n_class, 3, n_cell)."""

        def field(points: Floats) -> NDArray[np.complex128]:
            return polarization[:, None] * np.exp(1j * (points @ beam.direction))

        return parity_parts(field, self.points, self.signs, self.matrix.dtype.type)

    def rooted(self, field: NDArray) -> NDArray:
        """a^1/2 times a field, class by class."""
        root = self.matrix.root
        out = np.empty_like(field)
        rows = ((0, 3, 4), (3, 1, 5), (4, 5, 2))
        for part, image in zip(field, out, strict=True):
            for q, (a, b, c) in enumerate(rows):
                image[q] = root[a] * part[0] + root[b] * part[1] + root[c] * part[2]
        return out

    def solve(
        self,
        beam: Beam,
        polarization: Floats,
        directions: Floats,
        tolerance: float,
        start: NDArray | None = None,
        progress: Callable[[Iterate], None] | None = None,
        max_products: int = 2000,
    ) -> WaveResult:
        """Solve for one polarization and sum its far field.

        Parameters
        ----------
        beam : Beam
        polarization : float64 (3,)
            Unit vector across the beam.
        directions : float64 (n_direction, 3)
            Unit vectors in which the scattered field is wanted.
        tolerance : float
            Relative residual at which to stop.
        start : complex (n_class or n_lit, 3, n_cell), optional
            First solution x, that is a^1/2 times the exciting field, in all classes or in
            those that the wave has a part in, as `progress` sees them; overwritten.
        progress : callable(iterate), optional
        max_products : int
        """
        field = self.incident(beam, polarization)
        right = self.rooted(field)

        # Only classes that the wave has a part in are kept; the matrix never mixes them.
        lit = np.flatnonzero(np.any(right != 0.0, axis=(1, 2)))
        whole = np.zeros_like(right)

        def multiply(vector: NDArray) -> NDArray:
            whole[lit] = vector
            return self.matrix(whole[:, None])[lit, 0]

        right = right[lit]
        first = start if start is None or len(start) == len(lit) else start[lit]
        found = solve_symmetric(multiply, right, tolerance, first, max_products, progress)
        whole[lit] = found.fields
        found.fields = whole
        dipoles = self.rooted(whole)
        copies = float(self.matrix.n_class)
        # Classes are orthogonal; each cell stands for its images.
        extinction = 4.0 * np.pi * copies * _imaginary(field, dipoles)
        absorption = 4.0 * np.pi * copies * _loss(found.fields, self.matrix.loss)
        sums = dipole_sums(self.lattice, self.matrix, dipoles, directions)
        along = np.einsum("dq,dq->d", directions, sums)
        amplitude = sums - along[:, None] * directions
        return WaveResult(amplitude, extinction, absorption, found)


def _fundamental(lattice: Lattice) -> Lattice:
    """The lattice with its fundamental cells alone, where each cell's tensor is its own affair.

    Not so where neighbours exchange material (`scatterloom.dipole.exchange`).
    """
    if lattice.composition is not None:
        return lattice
    kept = np.ones(len(lattice.cell), dtype=bool)
    for axis in np.flatnonzero(lattice.mirrors):
        kept &= lattice.cell[:, axis] >= lattice.box[axis] // 2
    parts = {name: getattr(lattice, name)[kept] for name in ("cell", "fill", "normal", "area")}
    return replace(lattice, **parts)


def _imaginary(field: NDArray, dipoles: NDArray) -> float:
    """Im sum E* p, in double precision."""
    return sum(
        float(np.vdot(e, p).imag)
        for part, moment in zip(field, dipoles, strict=True)
        for e, p in zip(part.astype(np.complex128), moment.astype(np.complex128), strict=True)
    )


def _loss(fields: NDArray, loss: Floats) -> float:
    """Sum of x^H L x over cells and classes."""
    total = 0.0
    for part in fields:
        x, y, z = (component.astype(np.complex128) for component in part)
        total += float(loss[0] @ np.abs(x) ** 2 + loss[1] @ np.abs(y) ** 2)
        total += float(loss[2] @ np.abs(z) ** 2)
        for k, (a, b) in zip((3, 4, 5), ((x, y), (x, z), (y, z)), strict=True):
            total += 2.0 * float(loss[k] @ (a.conj() * b).real)
    return total


def amplitude_matrix(
    theta: NDArray[np.complex128],
    phi: NDArray[np.complex128],
    beam: Beam,
    azimuth_deg: float,
    angles_deg: Floats,
) -> NDArray[np.complex128]:
    """Amplitudes S2, S3, S4, S1 in a scattering plane (Bohren & Huffman 1983, eq. 3.12).

    Parameters
    ----------
    theta, phi : complex128 (n_angle, 3)
        Amplitudes of both polarizations in the directions of the plane (`WaveResult`).
    beam : Beam
    azimuth_deg : float
        Of the scattering plane, from the beam's theta vector towards its phi vector.
    angles_deg : float64 (n_angle,)

    Returns
    -------
    complex128 (n_angle, 2, 2)
        Scattered (parallel, perpendicular) from incident components.
    """
    a, t = np.radians(azimuth_deg), np.radians(angles_deg)
    out_of, into = plane_vectors(beam, azimuth_deg)
    along = np.cos(t)[:, None] * into - np.sin(t)[:, None] * beam.direction
    seen = np.stack([along, np.broadcast_to(-out_of, along.shape)], axis=1)  # (angle, 2, 3)
    # Incident parallel and perpendicular fields from those along theta and phi.
    mix = np.array([[np.cos(a), np.sin(a)], [np.sin(a), -np.cos(a)]])
    parts = np.stack([theta, phi], axis=-1) @ mix.T  # (angle, 3, 2)
    return -1j * (seen @ parts)


def plane_vectors(beam: Beam, azimuth_deg: float) -> tuple[Floats, Floats]:
    """Normal of a scattering plane, and the vector in it across the beam."""
    a = np.radians(azimuth_deg)
    into = np.cos(a) * beam.theta + np.sin(a) * beam.phi
    return np.cross(beam.direction, into), into


def plane_directions(beam: Beam, azimuth_deg: float, angles_deg: Floats) -> Floats:
    """Directions of scattering in a plane, float64 (n_angle, 3)."""
    t = np.radians(angles_deg)[:, None]
    _, into = plane_vectors(beam, azimuth_deg)
    return np.cos(t) * beam.direction + np.sin(t) * into
