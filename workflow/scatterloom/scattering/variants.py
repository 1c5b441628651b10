"""The variants of a case as linear combinations of a few transition matrices."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.error_bars import SOLVER, TRUNCATION
from scatterloom.scattering.extrapolate import combine, fits
from scatterloom.transition.level import LevelResult
from scatterloom.transition.matrix import TransitionMatrix


@dataclass(frozen=True, eq=False)
class Variants:
    """Best estimate of a case, first, and the variants behind its error bars.

    Amplitudes are linear in the transition matrix, so those of the sources serve all of them.

    Attributes
    ----------
    names, causes : tuple of str (n_variant,)
    sources : tuple of TransitionMatrix
        Those of the lattice levels, coarse to fine; the best estimate without the last
        correction of the amplitudes; the best estimate one degree shorter.
    weights : float64 (n_variant, n_source)
    level_weights : float64 (n_variant, n_level)
        The fit over the levels that each variant uses.
    """

    names: tuple[str, ...]
    causes: tuple[str, ...]
    sources: tuple[TransitionMatrix, ...]
    weights: NDArray[np.float64]
    level_weights: NDArray[np.float64]


def variants_of(levels: Sequence[LevelResult], cells: Sequence[int]) -> Variants:
    """Variants of a case from its lattice levels.

    Parameters
    ----------
    levels : sequence of LevelResult
        Coarse to fine, all with the same truncation.
    cells : sequence of int
        Cells across on each level.
    """
    corrected = [level.transition for level in levels]
    return variants_from(corrected, [level.uncorrected for level in levels], cells)


def variants_from(
    corrected: Sequence[TransitionMatrix],
    uncorrected: Sequence[TransitionMatrix],
    cells: Sequence[int],
) -> Variants:
    """Variants from the matrices of the levels with and without their last correction.

    Of the uncorrected ones a single combination, the best fit, may be given instead.
    """
    rivals = fits(cells)
    best = rivals[0]
    names = [(fit.name, fit.cause) for fit in rivals]
    plain = combine(uncorrected, best) if len(uncorrected) == len(cells) else uncorrected[0]
    sources = [*corrected, plain]
    names.append(("without the last correction", SOLVER))
    if sources[0].n_max > 1:
        sources.append(combine(corrected, best).cut(sources[0].n_max - 1))
        names.append(("one degree less", TRUNCATION))
    level_weights = np.stack([fit.weights for fit in rivals])
    extra = len(names) - len(rivals)
    weights = np.zeros((len(names), len(sources)))
    weights[: len(rivals), : len(cells)] = level_weights
    weights[len(rivals) :, len(cells) :] = np.eye(extra)
    return Variants(
        names=tuple(name for name, _ in names),
        causes=tuple(cause for _, cause in names),
        sources=tuple(sources),
        weights=weights,
        level_weights=np.concatenate([level_weights, np.repeat(best.weights[None], extra, 0)]),
    )
