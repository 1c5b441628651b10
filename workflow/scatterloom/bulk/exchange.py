"""What radiative transfer takes from the bulk properties: expansions, scaled and unscaled."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from scatterloom.bulk.coefficients import NAMES, Series, delta_m, fit_series
from scatterloom.errors import BadInput
from scatterloom.scattering.record import has_result
from scatterloom.store.schema import COVERAGE, HALF_WIDTH

if TYPE_CHECKING:
    import xarray

GRID = ("population", "wavelength")
SCALARS = (
    "extinction_cross_section",
    "extinction_per_volume",
    "extinction_per_mass",
    "single_scattering_albedo",
    "asymmetry_parameter",
    "backscatter_cross_section",
)
_ELEMENTS = ("F11", "F22 (with a3)", "F33 (with a2)", "F44", "F12", "F34")
SERIES_COMMENT = (
    "F11 = sum a1 d00; F44 = sum a4 d00; F22 + F33 = sum (a2 + a3) d22; "
    "F22 - F33 = sum (a2 - a3) d2,-2; F12 = -sum b1 d02; F34 = -sum b2 d02, with Wigner functions "
    "d^l_mn(angle), d^2_02 = sqrt(6)/4 sin^2; the factor 2l + 1 is part of the coefficients, "
    "a1 of degree 0 is 1 and the asymmetry parameter a third of a1 of degree 1; F21 = F12 and "
    "F43 = -F34"
)
SIGN_COMMENT = (
    "Stokes parameters (I, Q, U, V), signs of F12 and F34 as in Bohren & Huffman (1983), time "
    "factor exp(-i w t); b1 of small particles is positive (sqrt(6)/2). Where V has the other "
    "sign, change the sign of b2"
)


def exchange_dataset(bulk: xarray.Dataset, streams: int) -> xarray.Dataset:
    """Expand the matrix of every population at every wavelength.

    Parameters
    ----------
    bulk : xarray.Dataset
        Opened bulk properties.
    streams : int
        Streams of the delta-M scaled version.

    Returns
    -------
    xarray.Dataset
        Ready to be written; NaN where an average failed.

    Raises
    ------
    BadInput
        If the angles of the table do not allow an expansion.
    """
    import xarray

    angles = np.asarray(bulk["angle"].values, dtype=np.float64)
    known = has_result(bulk["status"].values)
    series: dict[tuple[int, int], Series] = {}
    for i, w in np.argwhere(known):
        part = bulk.isel(population=int(i), wavelength=int(w))
        try:
            series[int(i), int(w)] = fit_series(
                np.asarray(part["scattering_matrix"].values),
                np.asarray(part["scattering_matrix_error"].values),
                angles,
            )
        except ValueError as reason:
            raise BadInput(
                f"the scattering matrices cannot be expanded: {reason}\n"
                "  hint: give 'angles_deg: {from: 0, to: 180, step: 1}'; nothing is solved again"
            ) from None
    shape = known.shape
    longest = max((len(s.coefficients) for s in series.values()), default=1)
    full = np.full((*shape, longest, len(NAMES)), np.nan)
    half, scaled = full.copy(), np.full((*shape, streams, len(NAMES)), np.nan)
    single = {
        name: np.full(shape, np.nan)
        for name in (
            *("truncation_error", "normalization_defect", "forward_fraction"),
            *("scaled_single_scattering_albedo", "scaled_extinction_cross_section"),
        )
    }
    last, resolved = np.zeros(shape, np.int32), np.zeros(shape, np.int32)
    albedo = np.asarray(bulk["single_scattering_albedo"].values)
    extinction = np.asarray(bulk["extinction_cross_section"].values)
    for cell, s in series.items():
        count = len(s.coefficients)
        # Beyond its last degree a series is zero, which is the truth about the series.
        full[cell], half[cell] = 0.0, 0.0
        full[cell][:count], half[cell][:count] = s.coefficients, s.half_widths
        peak = delta_m(s.coefficients, streams)
        scaled[cell] = peak.coefficients
        single["truncation_error"][cell] = s.truncation_error
        single["normalization_defect"][cell] = s.normalization_defect
        single["forward_fraction"][cell] = peak.forward_fraction
        single["scaled_single_scattering_albedo"][cell] = peak.albedo(albedo[cell])
        single["scaled_extinction_cross_section"][cell] = peak.extinction(
            extinction[cell], albedo[cell]
        )
        last[cell], resolved[cell] = count - 1, s.resolved
    data: dict[str, tuple[Any, ...]] = {}
    for column, name in enumerate(NAMES):
        words = f"expansion coefficient {name} of {_ELEMENTS[column]}"
        data[name] = (
            (*GRID, "degree"),
            full[..., column],
            {
                **_plain(words),
                "ancillary_variables": f"{name}_error last_degree status",
                "comment": SERIES_COMMENT,
            },
        )
        data[f"{name}_error"] = (
            (*GRID, "degree"),
            half[..., column],
            {**_plain(f"half width of {words}"), **HALF_WIDTH, "comment": COVERAGE},
        )
        data[f"{name}_scaled"] = (
            (*GRID, "scaled_degree"),
            scaled[..., column],
            {
                **_plain(f"{words}, scaled by delta-M"),
                "comment": "(coefficient - f * that of the unit matrix)/(1 - f), Wiscombe 1977",
            },
        )
    for name, words in _WORDS.items():
        data[name] = (GRID, single[name], {**_plain(words), **_UNITS.get(name, {})})
    data["last_degree"] = (GRID, last, _plain("degree of the last coefficient that is not zero"))
    data["resolved"] = (
        GRID,
        resolved,
        {
            "long_name": "whether the truncation error is below 1e-5",
            "flag_values": np.array([0, 1], np.int32),
            "flag_meanings": "angles_too_coarse resolved",
        },
    )
    for name in SCALARS:
        for each in (name, f"{name}_error"):
            attributes = {k: v for k, v in bulk[each].attrs.items() if k != "coordinates"}
            data[each] = (GRID, np.asarray(bulk[each].values), attributes)
    data["status"] = (GRID, np.asarray(bulk["status"].values), _flags(bulk["status"].attrs))
    names = np.array([str(n) for n in bulk["population"].values], dtype=object)
    coordinates: dict[str, tuple[Any, ...]] = {
        "population": ("population", names, {"long_name": "name of the population"}),
        "wavelength": (
            "wavelength",
            np.asarray(bulk["wavelength"].values),
            dict(bulk["wavelength"].attrs),
        ),
        "degree": ("degree", np.arange(longest, dtype=np.int32), _plain("degree l of the series")),
        "scaled_degree": (
            "scaled_degree",
            np.arange(streams, dtype=np.int32),
            _plain("degree l of the scaled series"),
        ),
    }
    out = xarray.Dataset(data, coordinates, _attributes(bulk.attrs, streams))
    for key, variable in out.variables.items():
        name = str(key)
        quality = name.endswith(("_error", "_defect")) or name in ("status", "resolved")
        kind = "qualityInformation" if quality else "modelResult"
        variable.attrs["coverage_content_type"] = "coordinate" if name in coordinates else kind
    return out


_WORDS = {
    "truncation_error": "largest difference of the summed series from the matrix, over F11",
    "normalization_defect": "mean of F11 over the sphere less 1, before normalization",
    "forward_fraction": "part f of the scattering that delta-M puts into the direct beam",
    "scaled_single_scattering_albedo": "single-scattering albedo scaled by delta-M",
    "scaled_extinction_cross_section": "extinction cross section scaled by delta-M",
}
_UNITS = {"scaled_extinction_cross_section": {"units": "um2"}}


def _plain(words: str) -> dict[str, Any]:
    return {"long_name": words, "units": "1"}


def _flags(attributes: Mapping[str, Any]) -> dict[str, Any]:
    """Flag attributes in the type of the variable, as CF wants them."""
    return {
        name: np.asarray(value, np.int32) if name == "flag_values" else value
        for name, value in attributes.items()
    }


def _attributes(bulk: Mapping[str, Any], streams: int) -> dict[str, Any]:
    kept = (
        *("Conventions", "campaign", "project", "keywords", "license", "creator_name"),
        *("institution", "references", "acknowledgement", "source", "time_factor"),
        *("date_created", "numerics_revision", "version_scatterloom", "table_content_digest"),
        *("config", "standard_name_vocabulary", "product_version"),
    )
    out = {name: bulk[name] for name in kept if name in bulk}
    title = str(bulk.get("title", "")).removeprefix("Bulk properties: ")
    return out | {
        "title": f"Expansion coefficients: {title}",
        "summary": "Single-scattering properties of particle populations for radiative transfer: "
        "coefficients of their scattering matrices in generalized spherical functions (Wigner "
        "functions) with half widths, unscaled and scaled by delta-M",
        "id": f"{bulk.get('campaign', 'campaign')}-exchange",
        "history": f"{bulk.get('date_created', '')} expanded from the bulk properties",
        "sign_convention": SIGN_COMMENT,
        "error_statement": str(bulk.get("error_statement", "")),
        "delta_m_streams": streams,
    }
