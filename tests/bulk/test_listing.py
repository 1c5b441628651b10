"""Numbers with half widths as people read them."""

from __future__ import annotations

import pytest

from scatterloom.bulk.listing import flag_names, with_half_width
from scatterloom.bulk.schema import FLAGS

NAN = float("nan")


@pytest.mark.parametrize(
    ("value", "half_width", "text"),
    [
        (0.93056, 0.00361, "0.9306 ± 0.0036"),
        (88.123, 3.17, "88.1 ± 3.2"),
        (1234.4, 67.8, "1234 ± 68"),
        (-0.0001, 0.012, "-0.000 ± 0.012"),
        (1e-12, 1.2e-13, "1e-12 ± 1.2e-13"),
        (2.5e7, 1e5, "2.5e+07 ± 1e+05"),
        (0.5, 0.0, "0.5"),
        (0.5, NAN, "0.5"),
        (NAN, 0.1, "–"),
    ],
)
def test_value_with_half_width(value: float, half_width: float, text: str) -> None:
    assert with_half_width(value, half_width) == text


def test_flags_in_words() -> None:
    assert flag_names(0) == []
    both = FLAGS["missing_sizes"] | FLAGS["coarse_size_grid"]
    assert flag_names(both) == ["missing sizes", "coarse size grid"]
