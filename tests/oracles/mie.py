"""Homogeneous sphere: the Mie series (Bohren & Huffman 1983, ch. 4).

Time factor exp(-i w t): Im m > 0 absorbs. Efficiencies refer to the sphere's
geometric cross section.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import spherical_jn, spherical_yn

from oracles.mueller import mueller


@dataclass(frozen=True)
class Sphere:
    """Series of a sphere of relative index `index` and size parameter `size_parameter`.

    `a`, `b` are the coefficients of the electric and magnetic multipoles n = 1, 2, ...
    """

    index: complex
    size_parameter: float
    a: NDArray[np.complex128]
    b: NDArray[np.complex128]

    @property
    def order(self) -> NDArray[np.float64]:
        return np.arange(1, len(self.a) + 1, dtype=float)

    @property
    def extinction_efficiency(self) -> float:
        """Bohren & Huffman 1983, eq. 4.62."""
        return float(
            2 / self.size_parameter**2 * np.sum((2 * self.order + 1) * (self.a + self.b).real)
        )

    @property
    def scattering_efficiency(self) -> float:
        """Bohren & Huffman 1983, eq. 4.61."""
        power = np.abs(self.a) ** 2 + np.abs(self.b) ** 2
        return float(2 / self.size_parameter**2 * np.sum((2 * self.order + 1) * power))

    @property
    def absorption_efficiency(self) -> float:
        return self.extinction_efficiency - self.scattering_efficiency

    @property
    def single_scattering_albedo(self) -> float:
        return self.scattering_efficiency / self.extinction_efficiency

    @property
    def asymmetry_parameter(self) -> float:
        """Bohren & Huffman 1983, p. 120."""
        n, a, b = self.order, self.a, self.b
        neighbours = np.sum(
            (n * (n + 2) / (n + 1))[:-1] * (a[:-1] * np.conj(a[1:]) + b[:-1] * np.conj(b[1:])).real
        )
        mixed = np.sum((2 * n + 1) / (n * (n + 1)) * (a * np.conj(b)).real)
        return float(
            4 / (self.size_parameter**2 * self.scattering_efficiency) * (neighbours + mixed)
        )

    @property
    def backscattering_efficiency(self) -> float:
        """4 |S1(180 deg)|^2 / x^2 (Bohren & Huffman 1983, eq. 4.82 and App. A)."""
        n = self.order
        series = np.sum((2 * n + 1) * (-1.0) ** n * (self.a - self.b))
        return float(np.abs(series) ** 2 / self.size_parameter**2)

    def amplitudes(self, angles_deg) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """S1, S2 at scattering angles [deg] (Bohren & Huffman 1983, eq. 4.74)."""
        mu = np.cos(np.radians(np.asarray(angles_deg, float)))
        s1, s2 = np.zeros(mu.shape, complex), np.zeros(mu.shape, complex)
        before, pi = np.zeros_like(mu), np.ones_like(mu)
        for n, a, b in zip(self.order, self.a, self.b, strict=True):
            tau = n * mu * pi - (n + 1) * before
            weight = (2 * n + 1) / (n * (n + 1))
            s1 += weight * (a * pi + b * tau)
            s2 += weight * (a * tau + b * pi)
            before, pi = pi, ((2 * n + 1) * mu * pi - (n + 1) * before) / n
        return s1, s2

    def scattering_matrix(self, angles_deg) -> NDArray[np.float64]:
        """Mueller matrix (n_angle, 4, 4) with a mean F11 of 1 over the sphere."""
        s1, s2 = self.amplitudes(angles_deg)
        matrix = mueller(s1, s2, 0, 0)
        return matrix * 4 / (self.size_parameter**2 * self.scattering_efficiency)


def sphere(index: complex, size_parameter: float, n_max: int | None = None) -> Sphere:
    """Mie coefficients of a sphere.

    The series ends at x + 6 x^(1/3) + 12 terms (Wiscombe 1980 has 4.05 and 2; the
    margin is for 12 digits) unless `n_max` is given. The logarithmic derivative
    inside the sphere is found by downward recurrence, which is stable for any index
    (Bohren & Huffman 1983, eq. 4.88, 4.89). Where |m x| is large and m nearly real,
    the recurrence must start well above |m x|: it forgets its start only as fast as
    j_n decays there.
    """
    x, m = size_parameter, complex(index)
    if n_max is None:
        n_max = int(np.ceil(x + 6 * np.cbrt(x) + 12))
    y = m * x
    start = max(n_max, int(abs(y))) + 50 + int(15 * np.cbrt(abs(y)))
    derivative = np.zeros(start + 1, complex)
    for n in range(start, 0, -1):
        derivative[n - 1] = n / y - 1 / (derivative[n] + n / y)
    inside = derivative[1 : n_max + 1]
    order = np.arange(n_max + 1)
    psi = x * spherical_jn(order, x)
    xi = psi + 1j * x * spherical_yn(order, x)
    n = order[1:]
    electric = inside / m + n / x
    magnetic = inside * m + n / x
    a = (electric * psi[1:] - psi[:-1]) / (electric * xi[1:] - xi[:-1])
    b = (magnetic * psi[1:] - psi[:-1]) / (magnetic * xi[1:] - xi[:-1])
    return Sphere(m, x, a, b)
