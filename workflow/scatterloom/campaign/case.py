"""A case: the physics of one cell of the table, the accuracy asked, and its digest."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

from scatterloom.campaign import effort


@dataclass(frozen=True)
class Accuracy:
    """Accuracy asked of a case: F11 relative, ratios absolute, efficiencies relative."""

    f11_relative: float
    ratio_absolute: float
    efficiency_relative: float


@dataclass(frozen=True)
class Overrides:
    """Expert overrides that alter the numbers of a case; None where the program chooses."""

    levels: tuple[int, ...] | None = None
    tolerance: float | None = None


@dataclass(frozen=True)
class Case:
    """What is solved.

    Attributes
    ----------
    shape : mapping
        Canonical specification, such as {"kind": "spheroid", "equatorial_to_polar": 2.0}.
    index : complex
        Refractive index relative to the medium, twelve significant digits; of a coated particle
        that of the coating.
    size_parameter : float
        2 pi r n_medium / wavelength with the equal-volume radius r, twelve significant digits.
    accuracy : Accuracy
    overrides : Overrides
    inner_indices : tuple of complex
        Indices of the materials further inside, such as that of a core.
    """

    shape: Mapping[str, Any]
    index: complex
    size_parameter: float
    accuracy: Accuracy
    overrides: Overrides = Overrides()
    inner_indices: tuple[complex, ...] = ()

    @property
    def indices(self) -> tuple[complex, ...]:
        """Indices of all materials, from outside inwards."""
        return (self.index, *self.inner_indices)

    def __hash__(self) -> int:
        return hash(self.digest)

    @cached_property
    def digest(self) -> str:
        """Twenty hexadecimal digits that identify the case.

        They depend on the physical inputs, the accuracy, the overrides and the numerics
        revision, never on names, titles, angles or the wavelength itself.
        """
        content = {
            "shape": dict(self.shape),
            **indices_content(self.index, self.inner_indices),
            "size_parameter": self.size_parameter,
            "accuracy": vars(self.accuracy),  # asdict takes ten times as long
            "overrides": vars(self.overrides),
            "numerics_revision": effort.NUMERICS_REVISION,
        }
        return hashlib.sha256(canonical_json(content).encode()).hexdigest()[:20]


def indices_content(index: complex, inner: tuple[complex, ...]) -> dict[str, Any]:
    """Return indices as JSON can hold them; a particle of one material has no inner ones."""
    content: dict[str, Any] = {"index": [index.real, index.imag]}
    if inner:
        content["inner_indices"] = [[m.real, m.imag] for m in inner]
    return content


def canonical_json(value: Any) -> str:
    """Return JSON with sorted keys and no spaces; floats in their shortest exact form."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), allow_nan=False)
