"""Size distributions by number, with every moment in closed form.

Both are those of Hansen & Travis 1974 (Space Sci. Rev. 16, 527; section 2.4):
``lognormal`` and the standard ``gamma`` distribution. Radii are those of the sphere
of equal volume [um].
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammainc, gammaincc, gammaln, ndtr

FloatArray = NDArray[np.float64]


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


def from_spec(spec: Mapping[str, Any]) -> Distribution:
    """Make a distribution from its description in a campaign.

    Parameters
    ----------
    spec : mapping
        ``kind: lognormal`` with ``radius_um`` (median) and ``geometric_sd``, or with
        ``effective_radius_um`` and ``effective_variance``; ``kind: gamma`` with the
        latter two. Keys whose value is None count as absent.

    Returns
    -------
    Distribution

    Raises
    ------
    ValueError
        For an unknown kind, other keys, or values out of range.
    """
    given = {key: value for key, value in spec.items() if value is not None}
    kind = given.pop("kind", None)
    keys = set(given)
    effective = {"effective_radius_um", "effective_variance"}
    if kind == "lognormal" and keys == {"radius_um", "geometric_sd"}:
        if not (given["radius_um"] > 0 and given["geometric_sd"] > 1):
            raise ValueError("a lognormal population needs radius_um > 0 and geometric_sd > 1")
        return Lognormal(float(given["radius_um"]), math.log(given["geometric_sd"]))
    if kind not in ("lognormal", "gamma") or keys != effective:
        raise ValueError(
            "a population's size needs kind lognormal with radius_um and geometric_sd, or kind "
            "lognormal or gamma with effective_radius_um and effective_variance; "
            f"found kind {kind!r} with {sorted(keys)}"
        )
    radius, variance = float(given["effective_radius_um"]), float(given["effective_variance"])
    if not (radius > 0 and variance > 0):
        raise ValueError("effective_radius_um and effective_variance must be above zero")
    if kind == "gamma":
        if variance >= 0.5:
            raise ValueError(
                f"a gamma population needs an effective_variance below 0.5, found {variance}"
            )
        return Gamma(radius, variance)
    return Lognormal(radius / (1.0 + variance) ** 2.5, math.sqrt(math.log1p(variance)))
