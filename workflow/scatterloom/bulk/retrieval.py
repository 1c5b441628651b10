"""The non-negative size distribution of one or several particles that fits a measurement.

The unknown is the projected area per unit of ln r of each particle, piecewise linear in
ln r. It enters the matrix linearly, so for given weights the fit is a non-negative least
squares problem (Lawson & Hanson 1974), smoothed by squared second differences (Tikhonov);
the strength of the smoothing is the largest that keeps chi-square at the number of data
(discrepancy principle, Morozov 1966), or within 5 % and two standard deviations of its
least value if that is larger.
Ratios are made linear as F_ij - r F11 = 0; their weights, and the scale of F11 at each
wavelength, follow from the fit before, until nothing changes.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import nnls

from scatterloom.bulk.compare import SIGMAS, Model
from scatterloom.bulk.inverse_problem import Problem, node_steps
from scatterloom.bulk.measurement import BRIGHTNESS, RATIOS
from scatterloom.errors import BadInput

FloatArray = NDArray[np.float64]

_STRENGTHS = np.logspace(2.0, -10.0, 49)
_PASSES = 8
_DECADES = 3.0


@dataclass(frozen=True)
class Fit:
    """A fitted population.

    Attributes
    ----------
    problem : Problem
    area : float64 (n_particle, n_node)
        Projected area per unit of ln r; their integral is 1.
    chi_square, count : float, int
        Over `count` data.
    strength : float
        Of the smoothing.
    scales : tuple of float
        Factor on the measured F11 at each wavelength; NaN without F11.
    amplitude : float
        Total area on the scale of the first measured F11.
    """

    problem: Problem
    area: FloatArray
    chi_square: float
    count: int
    strength: float
    scales: tuple[float, ...]
    amplitude: float

    @property
    def shares(self) -> FloatArray:
        """Share of each particle in the projected area."""
        each = self.area @ node_steps(self.problem.radius_um)
        return np.array(each / each.sum(), dtype=np.float64, copy=False)

    @property
    def effective_radius_um(self) -> float:
        """Third over second moment of radius [um]."""
        weight = self.area.sum(axis=0) * node_steps(self.problem.radius_um)
        return float(weight @ self.problem.radius_um / weight.sum())

    @property
    def effective_variance(self) -> float:
        """Variance of radius weighted by area, over the effective radius squared."""
        weight = self.area.sum(axis=0) * node_steps(self.problem.radius_um)
        r = self.effective_radius_um
        return float(weight @ (self.problem.radius_um - r) ** 2 / weight.sum() / r**2)

    def chi_square_of(self, area: FloatArray) -> float:
        """Chi-square of another distribution of the same particles, scales left free."""
        x = area.ravel() * (self.amplitude / float(area.sum() / self.area.sum()))
        scales: list[float] = []
        for kernel in self.problem.kernels:
            value = kernel.measured.values.get(BRIGHTNESS)
            scales.append(math.nan)
            if value is not None and np.isfinite(value).any():
                rows = np.isfinite(value)
                f = (x @ kernel.matrix[:, :, 0, 0])[rows]
                weight = 1.0 / kernel.measured.errors[BRIGHTNESS][rows] ** 2
                top, low = np.sum(weight * f * value[rows]), np.sum(weight * value[rows] ** 2)
                scales[-1] = float(top / low)
        return _chi_square(_rows(self.problem, x, scales), x)

    def model(self, wavelength_um: float) -> Model:
        """The fitted matrix at a measured wavelength, for comparison."""
        waves = [float(k.measured.wavelength_um[0]) for k in self.problem.kernels]
        kernel = self.problem.kernels[waves.index(wavelength_um)]
        a = self.area.ravel()
        f = np.tensordot(a, kernel.table_matrix, axes=1)
        width = np.tensordot(a, kernel.table_half_width, axes=1)
        f11 = kernel.table_matrix[..., :1, :1]
        ratio = np.tensordot(a, kernel.table_ratio_half_width * f11, axes=1) / f[:, :1, :1]
        norm = f[0, 0, 0]
        return Model(self.problem.angle_deg, f / norm, width / norm, ratio)


def _smoothing(problem: Problem) -> FloatArray:
    """Second differences of each particle's distribution, zero beyond both ends."""
    n = problem.radius_um.size
    rows = np.zeros((n, n))
    for i in range(n):
        rows[i, i] = -2.0
        if i:
            rows[i, i - 1] = 1.0
        if i < n - 1:
            rows[i, i + 1] = 1.0
    return np.asarray(np.kron(np.eye(len(problem.particles)), rows), dtype=np.float64)


@dataclass(frozen=True)
class _Rows:
    """Weighted rows ``design @ x = data`` with unit errors."""

    design: FloatArray
    data: FloatArray


def _rows(
    problem: Problem,
    x: FloatArray,
    scales: Sequence[float],
    data_of: Sequence[Mapping[str, FloatArray]] | None = None,
) -> _Rows:
    """The linear system weighted by the errors at the current fit x.

    `data_of` replaces the measured values, by element at every wavelength.
    """
    design, data = [], []
    for w, kernel in enumerate(problem.kernels):
        part = kernel.measured
        f11 = kernel.matrix[:, :, 0, 0]
        bright = x @ f11
        for element, value in part.values.items():
            rows = np.isfinite(value)
            error = part.errors[element]
            value = data_of[w][element] if data_of else value
            if element == BRIGHTNESS:
                own = x @ kernel.half_width[:, :, 0, 0] / SIGMAS
                sd = np.hypot(scales[w] * error, own)[rows]
                design.append((f11[:, rows] / sd).T)
                data.append(scales[w] * value[rows] / sd)
            else:
                i, j = RATIOS[element]
                own = x @ (kernel.ratio_half_width[:, :, i, j] * f11) / bright / SIGMAS
                sd = (np.hypot(error, own) * bright)[rows]
                design.append(((kernel.matrix[:, :, i, j] - value * f11)[:, rows] / sd).T)
                data.append(np.zeros(int(rows.sum())))
    return _Rows(np.concatenate(design), np.concatenate(data))


def _solve(problem: Problem, rows: _Rows, strength: float, total: FloatArray) -> FloatArray:
    """Smoothed non-negative least squares; without F11 the total area is held at 1."""
    smooth = _smoothing(problem)
    size = np.linalg.norm(rows.design) / np.linalg.norm(smooth)
    parts = [rows.design, math.sqrt(strength) * size * smooth]
    right = [rows.data, np.zeros(len(smooth))]
    if not np.any(rows.data):
        parts.append(1e3 * np.linalg.norm(rows.design) * total[None, :])
        right.append(np.array([1e3 * np.linalg.norm(rows.design)]))
    solution, _ = nnls(np.concatenate(parts), np.concatenate(right), maxiter=50 * problem.unknowns)
    return np.asarray(solution)


def _chi_square(rows: _Rows, x: FloatArray) -> float:
    return float(np.sum((rows.design @ x - rows.data) ** 2))


def _rescaled(problem: Problem, x: FloatArray, before: Sequence[float]) -> list[float]:
    """Best scale of the measured F11 at every wavelength but the first that has it."""
    out, fixed = list(before), False
    for w, kernel in enumerate(problem.kernels):
        value = kernel.measured.values.get(BRIGHTNESS)
        if value is None or not np.isfinite(value).any():
            out[w] = math.nan
            continue
        if fixed:
            rows = np.isfinite(value)
            f = (x @ kernel.matrix[:, :, 0, 0])[rows]
            weight = 1.0 / kernel.measured.errors[BRIGHTNESS][rows] ** 2
            out[w] = float(np.sum(weight * f * value[rows]) / np.sum(weight * value[rows] ** 2))
        fixed = True
    return out


def fit(problem: Problem, strength: float | None = None) -> Fit:
    """Fit the distribution; the strength of smoothing is chosen unless given."""
    total = np.tile(node_steps(problem.radius_um), len(problem.particles))
    x, scales = _start(problem, total)
    chosen = strength
    rows = _rows(problem, x, scales)
    for turn in range(_PASSES):
        if strength is None and turn < 4:  # then kept, so that the passes settle
            chosen = _strength(problem, rows, total)
        assert chosen is not None
        x = _solve(problem, rows, chosen, total)
        if not x @ total > 0.0:
            raise BadInput(f"{problem.kernels[0].measured.file}: nothing of the table fits it")
        scales = _rescaled(problem, x, scales)
        rows = _rows(problem, x, scales)
    chi_square = _chi_square(rows, x)
    amplitude = float(x @ total)
    area = (x / amplitude).reshape(len(problem.particles), -1)
    return Fit(
        problem, area, chi_square, rows.data.size, float(chosen or 0.0), tuple(scales), amplitude
    )


def _start(problem: Problem, total: FloatArray) -> tuple[FloatArray, list[float]]:
    """A flat distribution as bright as the first measured F11, and scales to match it."""
    x = np.full(problem.unknowns, 1.0 / total.sum())
    scales: list[float] = []
    for kernel in problem.kernels:
        value = kernel.measured.values.get(BRIGHTNESS)
        if value is None or not np.isfinite(value).any():
            scales.append(math.nan)
            continue
        rows = np.isfinite(value)
        f = (x @ kernel.matrix[:, :, 0, 0])[rows]
        scales.append(float(np.exp(np.mean(np.log(f / value[rows])))))
    return x, scales


def _strength(problem: Problem, rows: _Rows, total: FloatArray) -> float:
    """Largest smoothing that the data allow."""
    least = _chi_square(rows, _solve(problem, rows, 0.0, total))
    # Of data that nothing fits, smoothing may add no more than chance would.
    count = float(rows.data.size)
    target = max(count, min(1.05 * least, least + 2.0 * math.sqrt(2.0 * count)))
    low, high = 0, _STRENGTHS.size - 1  # descending strengths: chi-square falls along them
    while low < high:
        middle = (low + high) // 2
        if _chi_square(rows, _solve(problem, rows, float(_STRENGTHS[middle]), total)) <= target:
            high = middle
        else:
            low = middle + 1
    return float(_STRENGTHS[low])


def bootstrap(best: Fit, samples: int, seed: int = 0) -> list[Fit]:
    """Fits to data drawn about the best fit with the errors measured (parametric bootstrap).

    The strength of the smoothing is drawn anew too, between the one chosen and a thousandth
    of it: with the noise alone, the spread would leave out what smoothing does to the truth.

    Parameters
    ----------
    best : Fit
    samples : int
    seed : int
        The same seed gives the same fits.
    """
    problem = best.problem
    random = np.random.default_rng(seed)
    total = np.tile(node_steps(problem.radius_um), len(problem.particles))
    x = best.amplitude * best.area.ravel()
    exact = []
    for scale, kernel in zip(best.scales, problem.kernels, strict=True):
        f = np.tensordot(x, kernel.matrix, axes=1)
        values = {e: f[:, *RATIOS[e]] / f[:, 0, 0] for e in kernel.measured.values if e in RATIOS}
        if BRIGHTNESS in kernel.measured.values:
            values[BRIGHTNESS] = f[:, 0, 0] / scale
        exact.append(values)
    out = []
    for _ in range(samples):
        drawn = [
            {
                e: value + random.standard_normal(value.size) * kernel.measured.errors[e]
                for e, value in values.items()
            }
            for values, kernel in zip(exact, problem.kernels, strict=True)
        ]
        rows = _rows(problem, x, best.scales, drawn)
        strength = best.strength * 10.0 ** random.uniform(-_DECADES, 0.0)
        found = _solve(problem, rows, strength, total)
        amplitude = float(found @ total)
        if amplitude > 0.0:
            area = (found / amplitude).reshape(best.area.shape)
            chi_square = _chi_square(rows, found)
            out.append(replace(best, area=area, chi_square=chi_square, amplitude=amplitude))
    return out
