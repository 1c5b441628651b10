"""Spheroid by the extended boundary condition (null-field) method (Waterman 1971, Phys. Rev. D 3).

Time factor exp(-i w t), k = 1 (lengths times the wavenumber), axis of rotation along z.

Vector spherical waves, c = sqrt((2n+1) / (4 pi n (n+1))), d = Wigner d^n_0m(theta), pi = m d/sin,
tau = d':  B = c (tau e_th + i pi e_ph) e^{im phi},  C = c (i pi e_th - tau e_ph) e^{im phi},
RgM = j_n C,  RgN = n(n+1) j_n/(kr) c d e^{im phi} e_r + [kr j_n]'/(kr) B; outgoing waves
with h_n in place of j_n. Scattered coefficients (p, q) = T (a, b) of the incident ones; for a
sphere T_MM = -b_n and T_NN = -a_n (Bohren & Huffman 1983).

Inside the particle the field is a sum of regular waves. The identity
    int_S n . (E x curl X - X x curl E) dS
of the field E on the surface (its tangential parts are continuous) with a wave X of the
medium, azimuth e^{-im phi}, is proportional to the incident coefficient if X is outgoing, and to
minus the scattered one if X is regular: T = -RgQ Q^-1, one block for each m.

Everything up to T is done in extended precision (numpy longdouble; 64-bit mantissa on x86-64),
because Q of an elongated particle is the small remainder of cancelling integrals.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

REAL, COMPLEX = np.longdouble, np.clongdouble


@dataclass(frozen=True)
class AxialTransition:
    """Transition matrix of a particle with rotational symmetry about z.

    Attributes
    ----------
    n_max : int
    size_parameter : float
        Of the sphere of equal volume.
    blocks : dict of int to complex128 (2 q, 2 q)
        For m = -n_max ... n_max; q = n_max + 1 - max(1, |m|) degrees, first all
        magnetic waves (M) by ascending degree, then all electric ones (N).
    """

    n_max: int
    size_parameter: float
    blocks: dict[int, NDArray[np.complex128]]

    def labels(self) -> NDArray[np.int64]:
        """Kind (0 M, 1 N), degree, order of the rows of `full`: int64 (3, 2 n_max (n_max+2))."""
        return np.array(
            [
                (kind, n, m)
                for m in range(-self.n_max, self.n_max + 1)
                for kind in (0, 1)
                for n in range(max(1, abs(m)), self.n_max + 1)
            ]
        ).T

    def full(self) -> NDArray[np.complex128]:
        """Whole matrix; rows sorted by order m, then kind, then degree."""
        count = 2 * self.n_max * (self.n_max + 2)
        matrix = np.zeros((count, count), complex)
        start = 0
        for m in range(-self.n_max, self.n_max + 1):
            end = start + len(self.blocks[m])
            matrix[start:end, start:end] = self.blocks[m]
            start = end
        return matrix


def half_axes(equatorial_to_polar: float) -> tuple[float, float]:
    """Equatorial and polar half axis of the spheroid of unit equal-volume radius."""
    equatorial = np.cbrt(equatorial_to_polar)
    return float(equatorial), float(1 / equatorial**2)


def truncation(equatorial_to_polar: float, size_parameter: float) -> int:
    """Degree up to which waves are kept.

    Two more degrees then change the cross sections by less than 1e-8 for axis ratios
    1/3 to 3, size parameters up to 6 and indices up to 1.75+0.44i (measured); by less
    than 1e-10 for 1/2 to 2. Many more degrees do harm: rounding grows with them.
    """
    reach = size_parameter * max(half_axes(equatorial_to_polar))
    return int(np.ceil(reach + 4.05 * np.cbrt(reach) + 7))


def spheroid(
    equatorial_to_polar: float,
    index: complex,
    size_parameter: float,
    n_max: int | None = None,
    n_node: int | None = None,
) -> AxialTransition:
    """Transition matrix of a spheroid.

    Parameters
    ----------
    equatorial_to_polar : float
        Ratio of equatorial to polar half axis.
    index : complex
        Relative refractive index; Im > 0 absorbs.
    size_parameter : float
        Of the sphere of equal volume.
    n_max : int, optional
        Highest degree; `truncation` unless given.
    n_node : int, optional
        Gauss-Legendre nodes between pole and equator; 2 n_max + 10 unless given.
    """
    n_max = n_max or truncation(equatorial_to_polar, size_parameter)
    n_node = n_node or 2 * n_max + 10
    mu, weight = _gauss(n_node)
    kr, slope = _surface(equatorial_to_polar, size_parameter, mu)
    outer, inner = kr.astype(COMPLEX), COMPLEX(index) * kr
    bessel, bessel_slope = _bessel(n_max, outer)
    neumann, neumann_slope = _neumann(n_max, kr)
    hankel, hankel_slope = bessel + 1j * neumann, bessel_slope + 1j * neumann_slope
    interior, interior_slope = _bessel(n_max, inner)
    blocks: dict[int, NDArray[np.complex128]] = {}
    for m in range(n_max + 1):
        n = np.arange(max(1, m), n_max + 1)
        angular = angular_functions(n_max, m, mu)
        use = slice(max(1, m), None)
        inside = _waves(n, angular, interior[use], interior_slope[use], inner, 1)
        # twice the hemisphere; the azimuth integral 2 pi and k are common to both
        area = weight * kr**2
        q, rg_q = (
            _boundary(
                inside,
                _waves(n, angular, radial[use], radial_slope[use], outer, -1),
                COMPLEX(index),
                area,
                slope,
                n,
            )
            for radial, radial_slope in ((hankel, hankel_slope), (bessel, bessel_slope))
        )
        block = -_divide(rg_q, q, n).astype(complex)
        blocks[m] = block
        # The mirror plane xz turns m into -m; M is a pseudo-vector wave, N is not.
        sign = np.repeat([1, -1], len(n))
        blocks[-m] = sign[:, None] * block * sign
    return AxialTransition(n_max, size_parameter, blocks)


def _gauss(count: int):
    """Gauss-Legendre nodes on (0, 1) in extended precision: Newton from the double ones."""
    mu, _ = np.polynomial.legendre.leggauss(2 * count)
    mu = mu[count:].astype(REAL)
    degree = 2 * count
    for _ in range(3):
        before, now = np.ones_like(mu), mu
        for n in range(2, degree + 1):
            before, now = now, ((2 * n - 1) * mu * now - (n - 1) * before) / n
        derivative = degree * (before - mu * now) / (1 - mu**2)
        mu = mu - now / derivative
    return mu, 2 / ((1 - mu**2) * derivative**2)


def _surface(equatorial_to_polar: float, size_parameter: float, mu):
    """kr and (dr/d theta)/r on the surface at mu = cos theta."""
    ratio = REAL(equatorial_to_polar)
    # 1/r^2 = sin^2/a^2 + cos^2/b^2 with a = ratio b and a^2 b = 1
    polar = REAL(size_parameter) * ratio ** (-REAL(2) / 3)
    shrink = (1 - mu**2) / ratio**2 + mu**2
    kr = polar / np.sqrt(shrink)
    return kr, -mu * np.sqrt(1 - mu**2) * (1 / ratio**2 - 1) / shrink


def _bessel(n_max: int, z):
    """j_n(z) and [z j_n]'/z, (n_max+1, node), by downward recurrence."""
    top = n_max + 40 + int(2 * np.max(np.abs(z)))
    values = np.zeros((top + 2, len(z)), COMPLEX)
    values[top] = REAL(1e-300)
    for n in range(top, 0, -1):
        values[n - 1] = (2 * n + 1) / z * values[n] - values[n + 1]
        # keep clear of overflow where longdouble is a double
        large = np.abs(values[n - 1]) > 1e200
        if np.any(large):
            values[n - 1 :, large] *= REAL(1e-250)
    first, second = np.sin(z) / z, np.sin(z) / z**2 - np.cos(z) / z
    # scale by the larger of j_0 and j_1: they have no common zero
    use_first = np.abs(first) >= np.abs(second)
    scale = np.where(use_first, first, second) / np.where(use_first, values[0], values[1])
    values = values[: n_max + 1] * scale
    return values, _slope(values, z, -values[1] + first / z)


def _neumann(n_max: int, x):
    """y_n(x) and [x y_n]'/x, (n_max+1, node), by upward recurrence."""
    values = np.zeros((n_max + 1, len(x)), REAL)
    values[0] = -np.cos(x) / x
    values[1] = -np.cos(x) / x**2 - np.sin(x) / x
    for n in range(1, n_max):
        values[n + 1] = (2 * n + 1) / x * values[n] - values[n - 1]
    return values, _slope(values, x, -values[1] + values[0] / x)


def _slope(values, z, lowest):
    """[z f_n]'/z = f_{n-1} - n f_n / z."""
    n = np.arange(len(values))[:, None]
    slope = np.empty_like(values)
    slope[0] = lowest
    slope[1:] = values[:-1] - n[1:] * values[1:] / z
    return slope


def angular_functions(n_max: int, m: int, mu):
    """d, pi, tau (n, ...) of d^n_0m at mu = cos theta, m >= 0, n = max(1, m) ... n_max."""
    real = mu.dtype.type
    sine = np.sqrt(1 - mu**2)
    d = np.zeros((n_max + 2, *mu.shape), mu.dtype)
    # d^m_0m = sqrt((2m-1)!!/(2m)!!) sin^m
    start = real(1)
    for j in range(1, m + 1):
        start *= np.sqrt(real(2 * j - 1) / real(2 * j))
    d[m] = start * sine**m
    for n in range(m, n_max):
        before = np.sqrt(real(n * n - m * m)) * d[n - 1] if n > m else 0
        d[n + 1] = ((2 * n + 1) * mu * d[n] - before) / np.sqrt(real((n + 1) ** 2 - m * m))
    n = np.arange(max(1, m), n_max + 1)
    column = n.reshape(-1, *[1] * mu.ndim)
    below = np.where(column > m, d[n - 1], 0)
    root = np.sqrt((column**2 - m * m).astype(mu.dtype))
    tau = (column * mu * d[n] - root * below) / sine
    return d[n], m * d[n] / sine, tau


def _waves(n, angular, radial, radial_slope, z, sign):
    """Components (r, theta, phi) of M and N with azimuth e^{i sign m phi}, up to (-1)^m."""
    d, pi, tau = angular
    norm = np.sqrt((2 * n + 1).astype(REAL) / (n * (n + 1)))[:, None]
    turn = COMPLEX(1j * sign)
    magnetic = (
        np.zeros_like(radial),
        turn * norm * pi * radial,
        -norm * tau * radial,
    )
    electric = (
        (n * (n + 1))[:, None] * norm * d * radial / z,
        norm * tau * radial_slope,
        turn * norm * pi * radial_slope,
    )
    return magnetic, electric


def _boundary(inside, test, index, area, slope, n):
    """Surface integral of n . (E x curl X - X x curl E): rows X, columns E."""
    count = len(n)
    matrix = np.zeros((2 * count, 2 * count), COMPLEX)
    for row, column in ((0, 0), (0, 1), (1, 0), (1, 1)):
        part = _bracket(inside[column], test[1 - row], area, slope)
        # curl of an inner wave carries the index; X x curl E = -(curl E) x X
        part = part + index * _bracket(inside[1 - column], test[row], area, slope)
        # Mirror plane xy: integrands odd about the equator vanish.
        same = (n[:, None] + n) % 2 == 0
        keep = same if row == column else ~same
        block = np.where(keep, part.T, 0)
        matrix[row * count : (row + 1) * count, column * count : (column + 1) * count] = block
    return matrix


def _bracket(first, second, area, slope):
    """Integral of n . (A x B) dS over the upper half, (n_A, n_B)."""
    (a_r, a_th, a_ph), (b_r, b_th, b_ph) = first, second
    return (
        a_th @ (area * b_ph).T
        - a_ph @ (area * (b_th + slope * b_r)).T
        + a_r @ (area * slope * b_ph).T
    )


def _divide(numerator, denominator, n):
    """numerator denominator^-1, each parity of the equatorial mirror apart."""
    result = np.zeros_like(numerator)
    label = np.concatenate([n % 2, (n + 1) % 2])
    for parity in (0, 1):
        rows = np.flatnonzero(label == parity)
        if len(rows):
            part = np.ix_(rows, rows)
            result[part] = _solve(denominator[part].T, numerator[part].T).T
    return result


def _solve(matrix, right):
    """Gaussian elimination with row pivoting in extended precision."""
    work = np.concatenate([matrix, right], axis=1)
    size = len(matrix)
    work /= np.abs(matrix).max(axis=1, keepdims=True)
    for i in range(size):
        pivot = i + int(np.argmax(np.abs(work[i:, i])))
        work[[i, pivot]] = work[[pivot, i]]
        work[i + 1 :, i:] -= work[i + 1 :, i : i + 1] / work[i, i] * work[i, i:]
    solution = work[:, size:]
    for i in range(size - 1, -1, -1):
        solution[i] = (solution[i] - work[i, i + 1 : size] @ solution[i + 1 :]) / work[i, i]
    return solution
