"""Size distributions made from others: reweighted, summed, tabulated."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from scatterloom.campaign.distribution import Distribution, FloatArray

ORDERS = {"number": 0, "area": 2, "volume": 3}
"""Power of radius that turns number into what a distribution is given by."""

_GAUSS = np.polynomial.legendre.leggauss(12)


class _Moments:
    """Effective radius and variance from the moments (Hansen & Travis 1974, eqs. 2.53, 2.54)."""

    def moment(self, order: float) -> float:
        raise NotImplementedError

    @property
    def effective_radius_um(self) -> float:
        return self.moment(3) / self.moment(2)

    @property
    def effective_variance(self) -> float:
        return self.moment(4) * self.moment(2) / self.moment(3) ** 2 - 1.0


@dataclass(frozen=True)
class Reweighted(_Moments):
    """Number distribution whose r^order-weighted form is `base`.

    Attributes
    ----------
    base : Distribution
        Distribution of area (order 2) or of volume (order 3) over ln r, read as if it
        were one by number; its moment of ``-order`` must exist.
    order : float
    """

    base: Distribution
    order: float

    @property
    def log_width(self) -> float:
        return self.base.log_width

    @property
    def breaks_um(self) -> tuple[float, ...]:
        return self.base.breaks_um

    @property
    def span_um(self) -> tuple[float, float]:
        low, high = self.base.span_um
        # Number lies at smaller radii than area or volume.
        return low / math.exp(min(self.order * self.base.log_width**2, 3.0)), high

    def density(self, radius_um: ArrayLike) -> FloatArray:
        r = np.asarray(radius_um, dtype=np.float64)
        return self.base.density(r) * r**-self.order / self.base.moment(-self.order)

    def moment(self, order: float) -> float:
        return self.base.moment(order - self.order) / self.base.moment(-self.order)

    def share_below(self, radius_um: float, order: float) -> float:
        return self.base.share_below(radius_um, order - self.order)

    def share_above(self, radius_um: float, order: float) -> float:
        return self.base.share_above(radius_um, order - self.order)


@dataclass(frozen=True)
class Sum(_Moments):
    """Several distributions side by side, such as a fine and a coarse mode.

    Attributes
    ----------
    modes : tuple of Distribution
    shares : tuple of float
        Share of each mode by number; they sum to 1.
    """

    modes: tuple[Distribution, ...]
    shares: tuple[float, ...]

    @classmethod
    def of(cls, modes: Sequence[Distribution], shares: Sequence[float], order: float) -> Sum:
        """Make a sum from shares by number (order 0), area (2) or volume (3), on any scale."""
        number = [s / mode.moment(order) for mode, s in zip(modes, shares, strict=True)]
        total = math.fsum(number)
        return cls(tuple(modes), tuple(n / total for n in number))

    @property
    def log_width(self) -> float:
        return min(mode.log_width for mode in self.modes)

    @property
    def breaks_um(self) -> tuple[float, ...]:
        return tuple(sorted(b for mode in self.modes for b in mode.breaks_um))

    @property
    def span_um(self) -> tuple[float, float]:
        low, high = zip(*(mode.span_um for mode in self.modes), strict=True)
        return min(low), max(high)

    def density(self, radius_um: ArrayLike) -> FloatArray:
        parts = zip(self.modes, self.shares, strict=True)
        return np.sum([share * mode.density(radius_um) for mode, share in parts], axis=0)

    def moment(self, order: float) -> float:
        parts = zip(self.modes, self.shares, strict=True)
        return math.fsum(share * mode.moment(order) for mode, share in parts)

    def share_below(self, radius_um: float, order: float) -> float:
        return self._share([m.share_below(radius_um, order) for m in self.modes], order)

    def share_above(self, radius_um: float, order: float) -> float:
        return self._share([m.share_above(radius_um, order) for m in self.modes], order)

    def _share(self, parts: Sequence[float], order: float) -> float:
        weighted = [s * m.moment(order) for m, s in zip(self.modes, self.shares, strict=True)]
        return math.fsum(w * p for w, p in zip(weighted, parts, strict=True)) / math.fsum(weighted)


@dataclass(frozen=True, eq=False)
class Tabulated(_Moments):
    """Density per unit of ln r, linear in ln r between the rows and zero outside them.

    Attributes
    ----------
    radius_um : float64 (n_row,)
        Increasing [um].
    value : float64 (n_row,)
        Number per unit of ln r on any scale; zero or more, not all zero.
    """

    radius_um: FloatArray
    value: FloatArray

    @property
    def log_width(self) -> float:
        return float(np.diff(np.log(self.radius_um)).max())

    @property
    def breaks_um(self) -> tuple[float, ...]:
        return tuple(float(r) for r in self.radius_um)

    @property
    def span_um(self) -> tuple[float, float]:
        return float(self.radius_um[0]), float(self.radius_um[-1])

    def _shape(self, radius_um: ArrayLike) -> FloatArray:
        u = np.log(np.asarray(radius_um, dtype=np.float64))
        return np.interp(u, np.log(self.radius_um), self.value, left=0.0, right=0.0)

    @cached_property
    def _whole(self) -> float:
        return self._integral(0.0, math.inf, 0.0)

    def _integral(self, low: float, high: float, order: float) -> float:
        """Gauss quadrature between rows: exact to rounding for rows less than a decade apart."""
        inside = self.radius_um[(self.radius_um > low) & (self.radius_um < high)]
        ends = [max(low, self.radius_um[0]), min(high, self.radius_um[-1])]
        if ends[1] <= ends[0]:
            return 0.0
        u = np.log(np.unique(np.concatenate([ends, inside])))
        node, weight = _GAUSS
        half = 0.5 * np.diff(u)
        r = np.exp(u[:-1, None] + half[:, None] * (1.0 + node))
        return float(np.sum(half[:, None] * weight * self._shape(r) * r**order))

    def density(self, radius_um: ArrayLike) -> FloatArray:
        return self._shape(radius_um) / self._whole

    def moment(self, order: float) -> float:
        return self._integral(0.0, math.inf, order) / self._whole

    def share_below(self, radius_um: float, order: float) -> float:
        return self._integral(0.0, radius_um, order) / self._integral(0.0, math.inf, order)

    def share_above(self, radius_um: float, order: float) -> float:
        return self._integral(radius_um, math.inf, order) / self._integral(0.0, math.inf, order)


def by(distribution: Distribution, what: str) -> Distribution:
    """Read a distribution as one of number, area or volume; return that of number."""
    return Reweighted(distribution, ORDERS[what]) if ORDERS[what] else distribution
