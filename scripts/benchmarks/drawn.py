"""Random cases of fixed seeds, and the values they are compared with."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from benchmarks.cases import predicted_seconds
from oracles.axial import random_orientation
from oracles.coated import coated_sphere
from oracles.mie import sphere
from oracles.spheroid import spheroid, truncation
from scatterloom.campaign import effort
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.scattering.expansion import synthesize
from scatterloom.scattering.extrapolate import combine, fits
from scatterloom.scattering.observables import Observables, observe
from scatterloom.transition.level import solve_level

SPHERE, SPHEROID, COATED = "sphere", "spheroid", "coated sphere"
TURNED, EDGED = "spheroid, turned lattice", "cube or hexagonal prism"

MOST_SECONDS = 2.2
"""Predicted time of the first three lattices above which a case is left out."""

REFERENCE_CELLS = (48, 64)
"""Lattices whose d^2 extrapolation stands for the exact value of an edged particle."""


class Reference(Protocol):
    """Exact values of a case, as the oracles give them."""

    extinction_efficiency: float
    scattering_efficiency: float
    asymmetry_parameter: float

    @property
    def absorption_efficiency(self) -> float: ...

    @property
    def single_scattering_albedo(self) -> float: ...

    def scattering_matrix(self, angles_deg: NDArray[np.float64]) -> NDArray[np.float64]: ...


@dataclass(frozen=True)
class Drawn:
    """A random case.

    Attributes
    ----------
    kind : str
        One of the kinds above.
    spec : mapping
        Shape, as a campaign describes it.
    indices : tuple of complex
        From outside inwards.
    size_parameter : float
    turn : tuple of 3 float or None
        Rotation vector of the particle against the lattice [rad].
    """

    kind: str
    spec: Mapping[str, Any]
    indices: tuple[complex, ...]
    size_parameter: float
    turn: tuple[float, ...] | None = None

    @property
    def absorbing(self) -> bool:
        return any(index.imag > 0.0 for index in self.indices)

    @property
    def strongest(self) -> float:
        """Largest |m|."""
        return max(abs(index) for index in self.indices)

    @property
    def rotation(self) -> NDArray[np.float64] | None:
        return None if self.turn is None else Rotation.from_rotvec(self.turn).as_matrix()


@dataclass(frozen=True)
class Limits:
    """Ranges to draw from; every index of a case obeys `largest_index`."""

    largest_x: float
    largest_index: float
    smallest_x: float = 0.3
    lowest_real: float = 1.05
    highest_real: float = 2.0
    largest_imaginary: float = 0.5


def _index(random: np.random.Generator, limits: Limits) -> complex:
    """Two in five do not absorb; imaginary parts evenly in their logarithm from 1e-4."""
    while True:
        real = round(random.uniform(limits.lowest_real, limits.highest_real), 3)
        k = float(10.0 ** random.uniform(-4.0, np.log10(limits.largest_imaginary)))
        index = complex(real, k if random.random() > 0.4 else 0.0)
        if abs(index) <= limits.largest_index:
            return index


def _case(kind: str, random: np.random.Generator, limits: Limits) -> Drawn:
    """Size and axis ratio evenly in their logarithms."""
    x = float(np.exp(random.uniform(np.log(limits.smallest_x), np.log(limits.largest_x))))
    indices: tuple[complex, ...] = (_index(random, limits),)
    spec: dict[str, Any]
    turn = None
    if kind == SPHERE:
        spec = {"kind": "sphere"}
    elif kind == COATED:
        spec = {"kind": "sphere", "core_radius_fraction": round(random.uniform(0.3, 0.9), 3)}
        indices = (*indices, _index(random, limits))
    elif kind == EDGED:
        spec = {"kind": "cuboid", "edges": [1.0, 1.0, 1.0]}
        if random.random() < 0.5:
            height = round(float(np.exp(random.uniform(np.log(0.5), np.log(1.5)))), 3)
            spec = {"kind": "prism", "sides": 6, "height_to_width": height}
    else:
        ratio = float(np.exp(random.uniform(-np.log(3.0), np.log(3.0))))
        spec = {"kind": "spheroid", "equatorial_to_polar": ratio}
        if kind == TURNED:
            turn = tuple(float(v) for v in Rotation.random(random_state=random).as_rotvec())
    return Drawn(kind, spec, indices, x, turn)


def draw(
    wanted: Mapping[str, tuple[int, Limits]],
    seed: int,
    f11_relative: float,
) -> tuple[list[Drawn], int]:
    """Random cases, kinds mixed in the order of a random deck; too costly ones are replaced.

    Parameters
    ----------
    wanted : mapping of kind to (number of cases, limits)
    seed : int
    f11_relative : float
        Accuracy that the cost is predicted for.

    Returns
    -------
    cases : list of Drawn
    skipped : int
        Cases left out for their cost.
    """
    random = np.random.default_rng(seed)
    deck = [kind for kind, (count, _) in wanted.items() for _ in range(count)]
    random.shuffle(deck)
    cases, skipped = [], 0
    for kind in deck:
        while True:
            case = _case(kind, random, wanted[kind][1])
            seconds = predicted_seconds(case.spec, case.indices, case.size_parameter, f11_relative)
            if seconds <= MOST_SECONDS:
                break
            skipped += 1
        cases.append(case)
    return cases, skipped


@dataclass(frozen=True)
class _Extrapolated:
    """Values from much finer lattices, with the interface of the oracles."""

    observables: Observables

    @property
    def extinction_efficiency(self) -> float:
        return self.observables.extinction_efficiency

    @property
    def scattering_efficiency(self) -> float:
        return self.observables.scattering_efficiency

    @property
    def asymmetry_parameter(self) -> float:
        return self.observables.asymmetry_parameter

    @property
    def absorption_efficiency(self) -> float:
        return self.extinction_efficiency - self.scattering_efficiency

    @property
    def single_scattering_albedo(self) -> float:
        return self.scattering_efficiency / self.extinction_efficiency

    def scattering_matrix(self, angles_deg: NDArray[np.float64]) -> NDArray[np.float64]:
        return synthesize(self.observables.expansion, angles_deg)


def finer(
    spec: Mapping[str, Any],
    indices: tuple[complex, ...],
    x: float,
    threads: int,
    cells: tuple[int, ...] = REFERENCE_CELLS,
) -> Reference:
    """Reference of a particle without exact solution: d^2 through two much finer lattices."""
    shape = from_spec(spec)
    n_max = effort.n_max((*shape.half_extents, shape.circumscribed_radius), x, 0.002)
    levels = [
        solve_level(lattice(shape, n), indices, x, n_max, 1e-5, threads=threads).transition
        for n in cells
    ]
    return _Extrapolated(observe(combine(levels, fits(cells)[0]), shape.symmetry, x))


def reference(case: Drawn, threads: int) -> Reference | None:
    """Exact values, or those of much finer lattices; None where the oracle does not converge.

    The extended boundary condition method fails in finite precision for large, elongated
    and strongly refracting spheroids: two degrees more must not change it by 1e-6.
    """
    x = case.size_parameter
    if case.kind == SPHERE:
        return sphere(case.indices[0], x)
    if case.kind == COATED:
        coating, core = case.indices
        return coated_sphere(core, coating, case.spec["core_radius_fraction"] * x, x)
    if case.kind == EDGED:
        return finer(case.spec, case.indices, x, threads)
    ratio, index = case.spec["equatorial_to_polar"], case.indices[0]
    first = spheroid(ratio, index, x)
    second = spheroid(ratio, index, x, n_max=truncation(ratio, x) + 2)

    def extinction(blocks: Mapping[int, NDArray[np.complex128]]) -> float:
        return -float(sum(np.trace(block) for block in blocks.values()).real)

    one, other = extinction(first.blocks), extinction(second.blocks)
    return random_orientation(first) if abs(one - other) < 1e-6 * abs(one) else None
