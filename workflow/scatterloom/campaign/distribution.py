"""Size distributions by number, with every moment in closed form.

Lognormal and the standard gamma distribution are those of Hansen & Travis 1974
(Space Sci. Rev. 16, 527; section 2.4), the power law with cut-offs too; the modified
gamma distribution is that of Deirmendjian 1969 (Electromagnetic Scattering on Spherical
Polydispersions, section 4.1). Radii are those of the sphere of equal volume [um].
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammainc, gammaincc, gammainccinv, gammaincinv, gammaln, ndtr

FloatArray = NDArray[np.float64]

_OUTSIDE = 1e-4
"""Share by number below, and by volume above, that `span_um` leaves out."""


class Distribution(Protocol):
    """What the averages need to know of a size distribution."""

    @property
    def effective_radius_um(self) -> float:
        """Ratio of the third to the second moment of radius [um]."""

    @property
    def effective_variance(self) -> float:
        """Variance of radius about the effective radius, weighted by r^2, over r_eff^2."""

    @property
    def log_width(self) -> float:
        """Scale on which the density changes with ln r, for choosing quadrature steps."""

    @property
    def breaks_um(self) -> tuple[float, ...]:
        """Radii at which the density jumps or has a kink [um]; quadrature stops there."""

    @property
    def span_um(self) -> tuple[float, float]:
        """Radii between which practically all number, area and volume lies [um]."""

    def density(self, radius_um: ArrayLike) -> FloatArray:
        """Number of particles per unit of ln r, of a total of 1."""

    def moment(self, order: float) -> float:
        """Mean of radius to the power `order` [um^order]."""

    def share_below(self, radius_um: float, order: float) -> float:
        """Part of the moment `order` that comes from radii below `radius_um`."""

    def share_above(self, radius_um: float, order: float) -> float:
        """Part of the moment `order` that comes from radii above `radius_um`."""


@dataclass(frozen=True)
class Lognormal:
    """Normal distribution of ln r about ln(median) with deviation ln(geometric_sd).

    Attributes
    ----------
    median_um : float
        Median radius by number [um].
    log_sd : float
        Standard deviation of ln r, the logarithm of the geometric standard deviation.
    """

    median_um: float
    log_sd: float

    @property
    def effective_radius_um(self) -> float:
        return self.median_um * math.exp(2.5 * self.log_sd**2)

    @property
    def effective_variance(self) -> float:
        return math.expm1(self.log_sd**2)

    @property
    def log_width(self) -> float:
        return self.log_sd

    breaks_um = ()

    @property
    def span_um(self) -> tuple[float, float]:
        reach, area_shift = 4.0 * self.log_sd, 3.0 * self.log_sd**2
        return self.median_um * math.exp(-reach), self.median_um * math.exp(reach + area_shift)

    def density(self, radius_um: ArrayLike) -> FloatArray:
        z = np.log(np.asarray(radius_um, dtype=np.float64) / self.median_um) / self.log_sd
        return np.exp(-0.5 * z**2) / (math.sqrt(2.0 * math.pi) * self.log_sd)

    def moment(self, order: float) -> float:
        return self.median_um**order * math.exp(0.5 * (order * self.log_sd) ** 2)

    def _score(self, radius_um: float, order: float) -> float:
        return math.log(radius_um / self.median_um) / self.log_sd - order * self.log_sd

    def share_below(self, radius_um: float, order: float) -> float:
        return float(ndtr(self._score(radius_um, order)))

    def share_above(self, radius_um: float, order: float) -> float:
        return float(ndtr(-self._score(radius_um, order)))


@dataclass(frozen=True)
class Gamma:
    """Number proportional to ``r^((1 - 3b)/b) exp(-r / (ab))``.

    Attributes
    ----------
    effective_radius_um : float
        a, the effective radius [um].
    effective_variance : float
        b, above 0 and below 1/2 (where the number of particles diverges).
    """

    effective_radius_um: float
    effective_variance: float

    @property
    def _shape(self) -> float:
        return (1.0 - 2.0 * self.effective_variance) / self.effective_variance

    @property
    def _scale(self) -> float:
        return self.effective_radius_um * self.effective_variance

    @property
    def log_width(self) -> float:
        return 1.0 / math.sqrt(self._shape)

    breaks_um = ()

    @property
    def span_um(self) -> tuple[float, float]:
        low = gammaincinv(self._shape, _OUTSIDE)
        high = gammainccinv(self._shape + 3.0, _OUTSIDE)
        return float(low * self._scale), float(high * self._scale)

    def density(self, radius_um: ArrayLike) -> FloatArray:
        t = np.asarray(radius_um, dtype=np.float64) / self._scale
        return np.exp(self._shape * np.log(t) - t - gammaln(self._shape))

    def moment(self, order: float) -> float:
        log_ratio = gammaln(self._shape + order) - gammaln(self._shape)
        return float(self._scale**order * math.exp(log_ratio))

    def share_below(self, radius_um: float, order: float) -> float:
        return float(gammainc(self._shape + order, radius_um / self._scale))

    def share_above(self, radius_um: float, order: float) -> float:
        return float(gammaincc(self._shape + order, radius_um / self._scale))


@dataclass(frozen=True)
class ModifiedGamma:
    """Number per unit of radius proportional to ``r^alpha exp(-(alpha/gamma) (r/r_c)^gamma)``.

    Attributes
    ----------
    mode_um : float
        Mode radius r_c, where the number per unit of radius is largest [um].
    alpha, gamma : float
        Exponents, both above zero.
    """

    mode_um: float
    alpha: float
    gamma: float

    @property
    def _shape(self) -> float:
        return (self.alpha + 1.0) / self.gamma

    @property
    def _scale(self) -> float:
        """Radius at which the exponent is -1 [um]."""
        return self.mode_um * (self.gamma / self.alpha) ** (1.0 / self.gamma)

    @property
    def effective_radius_um(self) -> float:
        return self.moment(3) / self.moment(2)

    @property
    def effective_variance(self) -> float:
        return self.moment(4) * self.moment(2) / self.moment(3) ** 2 - 1.0

    @property
    def log_width(self) -> float:
        return 1.0 / (self.gamma * math.sqrt(self._shape))

    breaks_um = ()

    @property
    def span_um(self) -> tuple[float, float]:
        low = gammaincinv(self._shape, _OUTSIDE) ** (1.0 / self.gamma)
        high = gammainccinv(self._shape + 3.0 / self.gamma, _OUTSIDE) ** (1.0 / self.gamma)
        return float(low * self._scale), float(high * self._scale)

    def density(self, radius_um: ArrayLike) -> FloatArray:
        log_t = self.gamma * np.log(np.asarray(radius_um, dtype=np.float64) / self._scale)
        return self.gamma * np.exp(self._shape * log_t - np.exp(log_t) - gammaln(self._shape))

    def moment(self, order: float) -> float:
        shape = self._shape + order / self.gamma
        if shape <= 0.0:
            raise ValueError(f"the moment {order:g} of a modified gamma distribution diverges")
        return float(self._scale**order * math.exp(gammaln(shape) - gammaln(self._shape)))

    def _share(self, radius_um: float, order: float) -> tuple[float, float]:
        return self._shape + order / self.gamma, (radius_um / self._scale) ** self.gamma

    def share_below(self, radius_um: float, order: float) -> float:
        return float(gammainc(*self._share(radius_um, order)))

    def share_above(self, radius_um: float, order: float) -> float:
        return float(gammaincc(*self._share(radius_um, order)))


@dataclass(frozen=True)
class PowerLaw:
    """Number per unit of radius proportional to ``r^-exponent`` between two radii.

    Attributes
    ----------
    exponent : float
        Any real number.
    smallest_um, largest_um : float
        The cut-offs [um]; there are no particles outside.
    """

    exponent: float
    smallest_um: float
    largest_um: float

    def _integral(self, low: float, high: float, order: float) -> float:
        """Integral of r^(order + 1 - exponent) dln r, relative to its value at the smallest."""
        low, high = max(low, self.smallest_um), min(high, self.largest_um)
        if high <= low:
            return 0.0
        q, span = order + 1.0 - self.exponent, math.log(high / low)
        start = (low / self.smallest_um) ** q
        return start * (math.expm1(q * span) / q if abs(q * span) > 1e-12 else span)

    @property
    def effective_radius_um(self) -> float:
        return self.moment(3) / self.moment(2)

    @property
    def effective_variance(self) -> float:
        return self.moment(4) * self.moment(2) / self.moment(3) ** 2 - 1.0

    @property
    def log_width(self) -> float:
        return 1.0 / max(1.0, abs(self.exponent - 1.0))

    @property
    def breaks_um(self) -> tuple[float, ...]:
        return self.smallest_um, self.largest_um

    @property
    def span_um(self) -> tuple[float, float]:
        return self.smallest_um, self.largest_um

    def density(self, radius_um: ArrayLike) -> FloatArray:
        r = np.asarray(radius_um, dtype=np.float64)
        whole = self._integral(0.0, math.inf, 0.0)
        inside = (r >= self.smallest_um) & (r <= self.largest_um)
        return np.where(inside, (r / self.smallest_um) ** (1.0 - self.exponent) / whole, 0.0)

    def moment(self, order: float) -> float:
        ratio = self._integral(0.0, math.inf, order) / self._integral(0.0, math.inf, 0.0)
        return self.smallest_um**order * ratio

    def share_below(self, radius_um: float, order: float) -> float:
        return self._integral(0.0, radius_um, order) / self._integral(0.0, math.inf, order)

    def share_above(self, radius_um: float, order: float) -> float:
        return self._integral(radius_um, math.inf, order) / self._integral(0.0, math.inf, order)
