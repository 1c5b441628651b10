"""The index of one material after the other: constants, tables, the database, mixtures."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from scatterloom.campaign.complaints import nearest
from scatterloom.campaign.database import entry, nearby
from scatterloom.campaign.document import Document, KeyPath
from scatterloom.campaign.materials import Material, Mix
from scatterloom.campaign.mixing import RULES
from scatterloom.campaign.spectra import Spectrum
from scatterloom.errors import Problem


class IndexMaker:
    """Makes the index of one material after the other, mixtures from their parts."""

    def __init__(
        self,
        document: Document,
        materials: Mapping[str, Material],
        spectra: Mapping[str, Spectrum],
        wavelengths_um: Sequence[float],
    ) -> None:
        self.document = document
        self.wavelengths_um = wavelengths_um
        self.looked_up: dict[str, Spectrum] = {}
        self.problems: list[Problem] = []
        self._materials = materials
        self._spectra = spectra
        self._made: dict[str, tuple[complex, ...] | None] = {}
        self._open: list[str] = []

    def complain(
        self, path: KeyPath, message: str, found: str | None = None, hint: str | None = None
    ) -> None:
        """Note a problem."""
        self.problems.append(self.document.problem(path, message, found, hint))

    def index(self, name: str) -> tuple[complex, ...] | None:
        """Index n + ik at every wavelength, or None if it cannot be had."""
        if name in self._open:
            chain = " -> ".join([*self._open[self._open.index(name) :], name])
            hint = "a mixture needs parts that are not made of it"
            self.complain(
                ("materials", name, "mix"), f"materials.{name} is made of itself", chain, hint
            )
            return None
        if name not in self._made:
            self._open.append(name)
            self._made[name] = self._make(name)
            self._open.pop()
        return self._made[name]

    def _make(self, name: str) -> tuple[complex, ...] | None:
        material = self._materials.get(name)
        if material is None:  # reported with the other names
            return None
        if material.mix is not None:
            return self._mixed(name, material.mix)
        if material.n is not None and material.k is not None:
            return (complex(material.n, material.k),) * len(self.wavelengths_um)
        if material.database is not None:
            return self._values(self._looked_up(name, material.database, material.k))
        spectrum = self._spectra.get(name) or spectrum_of(material)
        if spectrum is None:
            return None
        rows = spectrum.wavelength_um[0], spectrum.wavelength_um[-1]
        covered = self._covered(name, "table" if material.table else "spectrum", rows)
        return self._values(spectrum) if covered else None

    def _values(self, spectrum: Spectrum | None) -> tuple[complex, ...] | None:
        if spectrum is None:
            return None
        return tuple(complex(*spectrum.at(w)) for w in self.wavelengths_um)

    def _covered(self, name: str, key: str, rows: tuple[float, float]) -> bool:
        outside = [w for w in self.wavelengths_um if not rows[0] <= w <= rows[1]]
        if outside:
            other = "add rows" if key != "database" else "take another entry"
            self.complain(
                ("materials", name, key),
                f"materials.{name}.{key} does not cover {listed(outside)}",
                f"rows from {rows[0]:g} to {rows[1]:g} um",
                f"{other} or drop these wavelengths: optical constants are never extrapolated",
            )
        return not outside

    def _looked_up(self, name: str, wanted: str, k: float | None) -> Spectrum | None:
        path = ("materials", name, "database")
        try:
            found = entry(wanted)
        except ValueError as error:
            self.complain(path, f"materials.{name}.database: {error}", self.document.show(path))
            return None
        if found is None:
            hint = nearest(wanted, near) if (near := nearby(wanted)) else None
            hint = hint or "the names are those of the pages of refractiveindex.info"
            message = f"materials.{name}.database names no entry"
            self.complain(path, message, self.document.show(path), hint)
            return None
        if (found.k is None) == (k is None):
            lacks = found.k is None
            self.complain(
                path,
                f"the entry {wanted} has {'no' if lacks else 'its own'} k",
                None if lacks else f"k: {k:g} beside it",
                "give 'k' beside 'database' (0 if it does not absorb), or take another entry"
                if lacks
                else "leave out 'k'",
            )
            return None
        if not self._covered(name, "database", found.range_um):
            return None
        waves = list(self.wavelengths_um)
        absorbed = [float(k or 0.0) if found.k is None else found.k(w) for w in waves]
        spectrum = Spectrum(waves, [found.n(w) for w in waves], absorbed)
        rows = zip(waves, spectrum.n, spectrum.k, strict=True)
        faulty = [w for w, n, q in rows if not (0.01 <= n <= 10.0 and 0.0 <= q <= 10.0)]
        if faulty:
            message = f"the entry {wanted} has no sound index at {listed(faulty)}"
            self.complain(path, message, hint="take another entry")
            return None
        self.looked_up[name] = spectrum
        return spectrum

    def _mixed(self, name: str, mix: Mix) -> tuple[complex, ...] | None:
        parts = {part: self.index(part) for part in (mix.host, *mix.inclusions)}
        indices = [values for values in parts.values() if values is not None]
        if len(indices) < len(parts):
            return None
        path = ("materials", name, "mix")
        shares = list(mix.inclusions.values())
        made = []
        for position, wavelength in enumerate(self.wavelengths_um):
            eps = [values[position] ** 2 for values in indices]
            metal = next((p for p, e in zip(parts, eps, strict=True) if e.real <= 0.0), None)
            if metal is not None:
                self.complain(
                    path,
                    f"materials.{name} is mixed from '{metal}', which is metallic at "
                    f"{wavelength:g} um",
                    hint="mixing rules are not reliable for metals: small grains of them resonate",
                )
                return None
            value = complex(np.sqrt(RULES[mix.rule](eps[0], eps[1:], shares)))
            # Twelve digits, as everywhere: rounding must not make a new case.
            made.append(complex(float(f"{value.real:.11e}"), float(f"{value.imag:.11e}")))
        return tuple(made)


def spectrum_of(material: Material) -> Spectrum | None:
    """Return the spectrum written out in the configuration, if that is how it is given."""
    if material.spectrum is None:
        return None
    rows = [(point.wavelength_um, point.n, point.k) for point in material.spectrum]
    wavelength, n, k = zip(*rows, strict=True)
    return Spectrum(wavelength, n, k)


def listed(wavelengths: Sequence[float]) -> str:
    text = ", ".join(f"{w:g}" for w in wavelengths[:4])
    return text + (f" and {len(wavelengths) - 4} more" if len(wavelengths) > 4 else "") + " um"
