"""What the interactive view of the report draws: numbers of the table, packed and thinned."""

from __future__ import annotations

import base64
import json
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.record import has_result

if TYPE_CHECKING:
    import xarray

LARGEST_NUMBERS = 800_000
"""Numbers held, values and half widths: about 4.3 MB of text."""

SCALARS = (
    ("extinction_efficiency", "extinction efficiency"),
    ("scattering_efficiency", "scattering efficiency"),
    ("absorption_efficiency", "absorption efficiency"),
    ("single_scattering_albedo", "single-scattering albedo"),
    ("asymmetry_parameter", "asymmetry parameter"),
)


def view_data(table: xarray.Dataset, bulk: xarray.Dataset | None = None) -> dict[str, Any]:
    """Numbers for the interactive view.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.
    bulk : xarray.Dataset, optional
        Bulk properties of its populations.

    Returns
    -------
    dict
        ``particles`` and ``populations`` (names), ``wavelengths_um``, ``radius_um`` and
        ``size_parameter`` (wavelength by size), ``angles_deg``, ``elements`` (such as "12":
        those that do not vanish everywhere), ``scalars`` (names and words), ``note`` (what was
        left out), and base64 of little-endian float32 arrays: ``matrix``, ``matrix_error``
        (particle, wavelength, size, element, angle), ``scalar``, ``scalar_error`` (particle,
        wavelength, size, scalar), ``mean``, ``mean_error`` (population, wavelength, element,
        angle). Element 11 is F11 itself, others are over F11. Cells without a result are NaN.
    """
    present = _present(table)
    elements = [f"{i + 1}{j + 1}" for i, j in present]
    particles, waves, sizes = (table.sizes[d] for d in ("particle", "wavelength", "size"))
    angles = np.arange(table.sizes["angle"])
    fixed = particles * waves * len(present) * 2
    kept = _thinned(sizes, LARGEST_NUMBERS // max(1, fixed * angles.size))
    if kept.size < min(sizes, 3):
        kept = _thinned(sizes, 3)
        angles = _thinned(angles.size, max(2, LARGEST_NUMBERS // max(1, fixed * kept.size)))
    note = ""
    if kept.size < sizes or angles.size < table.sizes["angle"]:
        note = (
            f"Thinned for this page: {kept.size} of {sizes} sizes and {angles.size} of "
            f"{table.sizes['angle']} angles; the table has all of them."
        )
    part = table.isel(size=kept, angle=angles)
    matrix = _packed_elements(part, "scattering_matrix", present)
    error = _packed_elements(part, "scattering_matrix_ratio_error", present, errors=True)
    names = [name for name, _ in SCALARS]
    solved = has_result(part["status"].values)[..., None]
    scalar = np.stack([part[name].values for name in names], axis=-1)
    scalar_error = np.stack([part[f"{name}_error"].values for name in names], axis=-1)
    out: dict[str, Any] = {
        "particles": [str(name) for name in table["particle"].values],
        "populations": [],
        "wavelengths_um": table["wavelength"].values.tolist(),
        "radius_um": part["radius_um"].values.tolist(),
        "size_parameter": part["size_parameter"].values.tolist(),
        "angles_deg": part["angle"].values.tolist(),
        "elements": elements,
        "scalars": [words for _, words in SCALARS],
        "note": note,
        "matrix": _text(matrix),
        "matrix_error": _text(error),
        "scalar": _text(np.where(solved, scalar, np.nan)),
        "scalar_error": _text(np.where(solved, scalar_error, np.nan)),
        "mean": "",
        "mean_error": "",
    }
    if bulk is not None:
        means = bulk.isel(angle=angles)
        out["populations"] = [str(name) for name in bulk["population"].values]
        out["mean"] = _text(_packed_elements(means, "scattering_matrix", present))
        out["mean_error"] = _text(
            _packed_elements(means, "scattering_matrix_ratio_error", present, errors=True)
        )
    return out


def embedded(data: dict[str, Any]) -> str:
    """JSON that may stand inside a script element of a page."""
    text = json.dumps(data, separators=(",", ":"), allow_nan=False)
    for mark, code in (("<", "\\u003c"), (">", "\\u003e"), ("&", "\\u0026")):
        text = text.replace(mark, code)
    return text


def _present(table: xarray.Dataset) -> list[tuple[int, int]]:
    """Elements that do not vanish in the whole table, a particle at a time."""
    found = np.zeros((4, 4), dtype=bool)
    for p in range(table.sizes["particle"]):
        values = table["scattering_matrix"].isel(particle=p).values
        found |= np.any(np.nan_to_num(values) != 0.0, axis=(0, 1, 2))
    # Those below the diagonal repeat the others but for signs.
    return [(i, j) for i in range(4) for j in range(i, 4) if found[i, j] or i == j == 0]


def _thinned(count: int, most: int) -> NDArray[np.intp]:
    """At most so many positions of `count`, evenly spread, both ends among them."""
    if count <= most:
        return np.arange(count)
    return np.unique(np.linspace(0, count - 1, max(2, most)).round().astype(np.intp))


def _packed_elements(
    part: xarray.Dataset, name: str, present: list[tuple[int, int]], errors: bool = False
) -> NDArray[np.float32]:
    """Elements (..., element, angle): F11, and others over F11, or their half widths."""
    first = part["scattering_matrix"].isel(row=0, col=0).values
    out = []
    for i, j in present:
        values = part[name].isel(row=i, col=j).values
        if i == j == 0:
            # The half width of F11 over itself is relative.
            out.append(values * first if errors else values)
        else:
            out.append(values if errors else values / first)
    return np.stack(out, axis=-2).astype("<f4")


def _text(values: NDArray) -> str:
    return base64.b64encode(np.ascontiguousarray(values, dtype="<f4").tobytes()).decode()
