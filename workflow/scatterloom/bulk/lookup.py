"""A table as a function: efficiencies and matrices between its sizes, wavelengths, indices.

Only shape, size parameter and relative index matter, so every (particle, wavelength) of the
table that has the wanted shape is a ladder of sizes at one index, whatever its wavelength.
A value is interpolated along each ladder by the cubic in ln x through the four nearest
sizes, then between ladders linearly in the index: along a line, or in a triangle of the
plane of n and k.

The error estimate is made from left-out nodes. Along a ladder the two sizes around the
target are left out in turn and predicted from their neighbours; the larger miss, scaled by
the ratio of the polynomials that govern the error of a cubic, with a factor of two for
safety, is the estimate. Between ladders each ladder used is left out and predicted
linearly from the nearest others; where they do not reach it, half of the spread of the
ladders used stands in its place. The table's own half widths add to it linearly.
"""

from __future__ import annotations

import itertools
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.bulk.blending import blend, left_out_error
from scatterloom.errors import BadInput
from scatterloom.scattering.record import has_result
from scatterloom.store.table import open_table

if TYPE_CHECKING:
    import xarray

FloatArray = NDArray[np.float64]

EFFICIENCIES = ("extinction_efficiency", "scattering_efficiency", "absorption_efficiency")
_SCALARS = (*EFFICIENCIES, "asymmetry_parameter", "single_scattering_albedo")
_MATRIX = "scattering_matrix"
_SAFETY = 2.0
_WINDOW = 6  # the cubic's four sizes and one more on either side, to leave out the inner two


@dataclass(frozen=True)
class Value:
    """An interpolated quantity.

    Attributes
    ----------
    value : float or float64 (...)
    error : float or float64 (...)
        Half width: that of the table plus the estimated interpolation error.
    interpolation_error : float or float64 (...)
        The latter alone; zero at a node.
    """

    value: Any
    error: Any
    interpolation_error: Any


@dataclass(frozen=True)
class Optics:
    """Optical properties of one particle.

    Attributes
    ----------
    size_parameter : float
    index : complex
        Relative to the medium.
    angle_deg : float64 (n_angle,)
    extinction_efficiency, scattering_efficiency, absorption_efficiency : Value
    asymmetry_parameter, single_scattering_albedo : Value
    scattering_matrix : Value
        Of float64 (n_angle, 4, 4), mean F11 of 1.
    """

    size_parameter: float
    index: complex
    angle_deg: FloatArray
    extinction_efficiency: Value
    scattering_efficiency: Value
    absorption_efficiency: Value
    asymmetry_parameter: Value
    single_scattering_albedo: Value
    scattering_matrix: Value


@dataclass(frozen=True)
class _Ladder:
    """Solved sizes at one index; positions lead to the cells of the table."""

    index: complex
    size_parameter: FloatArray
    cells: NDArray[np.intp]  # (n_size, 3): particle, wavelength, size


class Table:
    """A committed table that can be asked for values between its nodes.

    Parameters
    ----------
    path : path or xarray.Dataset
        A `table.zarr` folder, which is verified, or an opened table.

    Examples
    --------
    >>> table = Table("results/saltmere/table.zarr")  # doctest: +SKIP
    >>> optics = table.at("plate", radius_um=0.234, wavelength_um=0.532)  # doctest: +SKIP
    >>> optics.extinction_efficiency.value, optics.extinction_efficiency.error  # doctest: +SKIP
    """

    def __init__(self, path: Path | str | xarray.Dataset) -> None:
        self.dataset = open_table(path) if isinstance(path, Path | str) else path
        self.particles = tuple(str(name) for name in self.dataset["particle"].values)
        self.wavelength_um = np.asarray(self.dataset["wavelength"].values, dtype=np.float64)
        self.angle_deg = np.asarray(self.dataset["angle"].values, dtype=np.float64)
        n, k = (np.asarray(self.dataset[f"refractive_index_{p}"].values) for p in "nk")
        self._index = n + 1j * k
        self._core = _cores(self.dataset)
        self._shapes = _shapes(self.dataset.attrs, self.particles)
        # Of the medium at every wavelength, from x = 2 pi r n / wavelength.
        x, r = (np.asarray(self.dataset[v].values)[:, 0] for v in ("size_parameter", "radius_um"))
        steps = np.diff(np.log(np.asarray(self.dataset["size_parameter"].values)), axis=1)
        self._step = float(np.median(steps)) if steps.size else 0.0
        self._medium = x * self.wavelength_um / (2.0 * np.pi * r)

    def at(
        self,
        particle: str,
        *,
        radius_um: float | None = None,
        size_parameter: float | None = None,
        wavelength_um: float | None = None,
        index: complex | None = None,
    ) -> Optics:
        """Optical properties of a particle at any size, wavelength and index inside the table.

        Parameters
        ----------
        particle : str
            Its shape is taken; its index too, unless `index` is given.
        radius_um, size_parameter : float
            Exactly one of them: of the sphere of equal volume; a radius needs a wavelength.
        wavelength_um : float, optional
            In vacuum [um]. Between the table's wavelengths the index is interpolated
            linearly in the logarithm of wavelength.
        index : complex, optional
            Refractive index relative to the medium, n + ik.

        Raises
        ------
        BadInput
            For an unknown particle, a call that says too little or too much, or a point
            outside the table: nothing is extrapolated.
        """
        if particle not in self.particles:
            raise BadInput(f"no particle {particle!r}; the table has {', '.join(self.particles)}")
        if (radius_um is None) == (size_parameter is None):
            raise BadInput("give exactly one of radius_um and size_parameter")
        if radius_um is not None and wavelength_um is None:
            raise BadInput("a radius_um needs a wavelength_um")
        core = self._core_at(particle, wavelength_um)
        m = index if index is not None else self._index_at(particle, wavelength_um)
        if radius_um is not None and wavelength_um is not None:
            logs = np.log([wavelength_um, *self.wavelength_um])
            medium = float(np.interp(logs[0], logs[1:], self._medium))
            x = 2.0 * np.pi * radius_um * medium / wavelength_um
        else:
            x = float(size_parameter or 0.0)
        return self._interpolate(particle, x, complex(m), core)

    def _index_at(self, particle: str, wavelength_um: float | None) -> complex:
        own, waves = self._index[self.particles.index(particle)], self.wavelength_um
        if np.all(own == own[0]) and (
            wavelength_um is None or waves[0] <= wavelength_um <= waves[-1]
        ):
            return complex(own[0])
        if wavelength_um is None:
            raise BadInput(f"the index of {particle} changes with wavelength: give wavelength_um")
        if not waves[0] <= wavelength_um <= waves[-1]:
            raise BadInput(
                f"wavelength {wavelength_um:g} um lies outside the table, {waves[0]:g} to "
                f"{waves[-1]:g} um\n  hint: give index, if you know it there"
            )
        u, at = np.log(waves), np.log(wavelength_um)
        return complex(np.interp(at, u, own.real), np.interp(at, u, own.imag))

    def _core_at(self, particle: str, wavelength_um: float | None) -> str:
        """Core index of a coated particle as text; there is no interpolation in it."""
        own = self._core[self.particles.index(particle)]
        if len(set(own)) == 1:
            return own[0]
        at = np.flatnonzero(self.wavelength_um == (wavelength_um or 0.0))
        if at.size == 0:
            raise BadInput(
                f"the index of the core of {particle} changes with wavelength: give one of the "
                "table's wavelength_um"
            )
        return own[int(at[0])]

    def _ladders(self, particle: str, core: str = "") -> list[_Ladder]:
        """Every ladder of the particle's shape and core, equal indices put together."""
        shape = self._shapes[particle]
        status = has_result(self.dataset["status"].values)
        x = np.asarray(self.dataset["size_parameter"].values)
        cells: dict[complex, list[tuple[int, int, int]]] = {}
        for p, name in enumerate(self.particles):
            if self._shapes[name] != shape:
                continue
            for w, s in itertools.product(range(x.shape[0]), range(x.shape[1])):
                if status[p, w, s] and self._core[p][w] == core:
                    cells.setdefault(complex(self._index[p, w]), []).append((p, w, s))
        ladders = []
        for m, found in cells.items():
            at = np.array(found)
            # One case may stand in several cells: keep the first of equal sizes.
            sizes = x[at[:, 1], at[:, 2]]
            _, first = np.unique(np.round(sizes, 10), return_index=True)
            ladders.append(_Ladder(m, sizes[first], at[first]))
        return ladders

    def _interpolate(self, particle: str, x: float, m: complex, core: str) -> Optics:
        ladders = self._ladders(particle, core)
        reach = [
            k
            for k in ladders
            if k.size_parameter.size >= 4
            and k.size_parameter[0] * (1 - 1e-9) <= x <= k.size_parameter[-1] * (1 + 1e-9)
        ]
        if not reach:
            ends = ", ".join(
                f"{k.size_parameter[0]:.4g} to {k.size_parameter[-1]:.4g} at index {k.index:.5g}"
                for k in ladders
            )
            raise BadInput(
                f"size parameter {x:.4g} of {particle} lies outside the table ({ends}, four solved "
                "sizes at least)"
            )
        points = np.array([[k.index.real, k.index.imag] for k in reach])
        target = np.array([m.real, m.imag])
        weights = blend(points, target)
        if weights is None:
            known = ", ".join(f"{k.index:.5g}" for k in reach)
            raise BadInput(
                f"index {m:.5g} lies outside those of the table for {particle} at size parameter "
                f"{x:.4g} ({known})"
            )
        used = [int(j) for j in np.flatnonzero(weights)]
        # Leaving ladders out needs the others too; without a need they are not read.
        wanted = list(range(len(reach))) if len(used) > 1 else used
        rungs = {j: self._along(reach[j], x) for j in wanted}
        out: dict[str, Value] = {}
        for name in (*_SCALARS, _MATRIX):
            parts = {j: rung[name] for j, rung in rungs.items()}
            value = sum(weights[j] * parts[j].value for j in used)
            between = left_out_error(points, weights, {j: v.value for j, v in parts.items()})
            along = sum(weights[j] * parts[j].interpolation_error for j in used)
            table = sum(weights[j] * (parts[j].error - parts[j].interpolation_error) for j in used)
            out[name] = Value(value, table + along + between, along + between)
        return Optics(size_parameter=x, index=m, angle_deg=self.angle_deg, **out)

    def _along(self, ladder: _Ladder, x: float) -> dict[str, Value]:
        """Interpolate along one ladder."""
        at = np.log(x)
        kept = _spread(np.log(ladder.size_parameter), at, self._step)
        u = np.log(ladder.size_parameter)[kept]
        right = int(np.clip(np.searchsorted(u, at), 1, u.size - 1))
        first = int(np.clip(right - _WINDOW // 2, 0, max(0, u.size - _WINDOW)))
        window = np.arange(first, min(first + _WINDOW, u.size))
        nodes = u[window]
        near = _around(nodes, right - 1 - first)
        weights = _lagrange(nodes[near], at)
        inner = [right - 1 - first, right - first]
        scales = []
        for node in inner:
            others = np.delete(np.arange(nodes.size), node)
            others = others[np.argsort(np.abs(nodes[others] - nodes[node]), kind="stable")[:4]]
            scale = abs(np.prod(at - nodes[near]) / np.prod(nodes[node] - nodes[np.sort(others)]))
            scales.append((node, np.sort(others), _SAFETY * scale))
        out = {}
        part = self._cells(ladder.cells[kept[window]])
        for name in (*_SCALARS, _MATRIX):
            values, errors = part[name], part[f"{name}_error"]
            value = np.tensordot(weights, values[near], axes=1)
            error = np.tensordot(np.abs(weights), errors[near], axes=1)
            missed = [
                s * np.abs(values[n] - np.tensordot(_lagrange(nodes[o], nodes[n]), values[o], 1))
                for n, o, s in scales
            ]
            own = np.max(missed, axis=0)
            if name == _MATRIX:
                # A miss that crosses zero at some angle is not small by merit: no element has
                # less than half the largest at its angle, unless it vanishes for all sizes.
                least = 0.5 * own.max(axis=(-2, -1), keepdims=True)
                own = np.where(np.any(values != 0.0, axis=0), np.maximum(own, least), own)
            out[name] = Value(value, error + own, own)
        return out

    def _cells(self, cells: NDArray[np.intp]) -> Mapping[str, FloatArray]:
        import xarray

        names = [v for name in (*_SCALARS, _MATRIX) for v in (name, f"{name}_error")]
        p, w, s = (xarray.DataArray(column, dims="node") for column in cells.T)
        part = self.dataset[names].isel(particle=p, wavelength=w, size=s).load()
        axes = {name: ("node", *(d for d in part[name].dims if d != "node")) for name in names}
        return {n: np.asarray(part[n].transpose(*axes[n]).values, np.float64) for n in names}


def _spread(u: FloatArray, at: float, step: float) -> NDArray[np.intp]:
    """Positions at least half a step apart, from the nearest to `at` outwards.

    Sizes of two wavelengths, put together, may lie as close as they like, and a cubic
    magnifies the errors of close neighbours. The ends stay: nothing is extrapolated.
    """
    nearest = int(np.argmin(np.abs(u - at)))
    kept = [nearest]
    for path in (range(nearest + 1, u.size), range(nearest - 1, -1, -1)):
        last, end = nearest, u.size - 1 if path.step > 0 else 0
        for i in path:
            if abs(u[i] - u[last]) >= 0.5 * step or i == end:
                kept.append(i)
                last = i
    return np.array(sorted(kept))


def _around(nodes: FloatArray, left: int) -> NDArray[np.intp]:
    """The four nodes around the interval that starts at `left`."""
    first = int(np.clip(left - 1, 0, nodes.size - 4))
    return np.arange(first, first + 4)


def _lagrange(nodes: FloatArray, at: float) -> FloatArray:
    """Weights of the polynomial through the nodes."""
    return np.array(
        [
            np.prod((at - np.delete(nodes, i)) / (nodes[i] - np.delete(nodes, i)))
            for i in range(nodes.size)
        ]
    )


def _shapes(attributes: Mapping[str, Any], particles: Sequence[str]) -> dict[str, str]:
    """Shape of every particle as text to compare; unknown ones count as all different."""
    from ruamel.yaml import YAML

    shapes = {name: f"shape of {name}" for name in particles}
    config = YAML(typ="safe", pure=True).load(str(attributes.get("config", ""))) or {}
    for entry in config.get("particles", ()):
        if entry["name"] in shapes:
            coating = dict(entry.get("coating") or {})
            coating.pop("material", None)  # its index is in the table
            # Of more than two materials the table lacks some indices: their names stand for them.
            others = [entry.get("layers") or [], entry.get("inclusions") or []]
            parts = [entry["shape"], coating, *(others if any(others) else ())]
            shapes[entry["name"]] = json.dumps(parts, sort_keys=True)
    return shapes


def _cores(dataset: xarray.Dataset) -> list[list[str]]:
    """Index of the core by particle and wavelength as text to compare, empty without a core."""
    shape = (dataset.sizes["particle"], dataset.sizes["wavelength"])
    if "core_refractive_index_n" not in dataset:
        return [[""] * shape[1] for _ in range(shape[0])]
    n, k = (np.asarray(dataset[f"core_refractive_index_{part}"].values) for part in "nk")
    return [
        [f"{n[p, w]:.12g} {k[p, w]:.12g}" if np.isfinite(n[p, w]) else "" for w in range(shape[1])]
        for p in range(shape[0])
    ]
