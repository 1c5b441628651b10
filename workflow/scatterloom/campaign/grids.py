"""Grids of sizes and angles: a list of values, or a rule that makes them.

Values are made in decimal arithmetic from the digits that the user wrote, so that sizes
and wavelengths in a simple ratio give exactly the same size parameter.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal, localcontext
from typing import Annotated, Any

from pydantic import Discriminator, Tag, model_validator

from scatterloom.campaign.sections import Section, setting, wrong

MOST_SIZES = 100_000
MOST_ANGLES = 18_001
DIGITS = 40
"""Decimal digits carried in grids; far more than the twelve that identify a case."""


def _list_or_rule(value: Any) -> str | None:
    if isinstance(value, list):
        return "list"
    if isinstance(value, dict | Section):
        return "rule"
    return None


ListOrRule = Discriminator(_list_or_rule)


class SizeRule(Section):
    """Sizes in a constant ratio."""

    start: float = setting("Smallest size.", alias="from", unit="size", ge=1e-6, le=1e6)
    end: float = setting(
        "Largest size; with `ratio` and `per_doubling` the last size not above it.",
        alias="to",
        unit="size",
        ge=1e-6,
        le=1e6,
    )
    ratio: float | None = setting("Ratio of neighbouring sizes.", None, unit="1", gt=1.0, le=100.0)
    per_doubling: int | None = setting(
        "Sizes per factor of two. Wavelengths a factor of two apart then share their cases.",
        None,
        unit="1",
        ge=1,
        le=10_000,
    )
    count: int | None = setting(
        "Number of sizes, both ends included.", None, unit="1", ge=2, le=MOST_SIZES
    )

    @model_validator(mode="after")
    def _check(self) -> SizeRule:
        if self.start >= self.end:
            raise wrong(
                f"the range runs from {self.start:g} to {self.end:g}",
                "give a 'to' that is larger than 'from'",
                "to",
            )
        steps = {"ratio": self.ratio, "per_doubling": self.per_doubling, "count": self.count}
        given = [name for name, value in steps.items() if value is not None]
        if len(given) != 1:
            raise wrong(
                f"the range has several step rules, {' and '.join(given)}"
                if given
                else "the range has no step rule",
                "give exactly one of 'ratio', 'per_doubling' and 'count'",
                *given[1:2],
            )
        if (number := self.length()) > MOST_SIZES:
            raise wrong(
                f"the range makes {number} sizes",
                f"widen the step: at most {MOST_SIZES} sizes are possible",
                given[0],
            )
        return self

    def length(self) -> int:
        """Return the number of sizes."""
        if self.count is not None:
            return self.count
        ratio = self.ratio if self.ratio is not None else 2.0 ** (1 / (self.per_doubling or 1))
        # The small term keeps a last size that equals `to` but for rounding.
        return math.floor(math.log(self.end / self.start) / math.log(ratio) + 1e-9) + 1

    def values(self) -> list[Decimal]:
        """Return the sizes, ascending."""
        with localcontext(prec=DIGITS):
            start, end, number = decimal(self.start), decimal(self.end), self.length()
            if self.count is not None:
                steps = Decimal(self.count - 1)
                inner = [start * (end / start) ** (i / steps) for i in range(1, number - 1)]
                return [start, *inner, end]
            if self.per_doubling is not None:
                octaves = [Decimal(i) / self.per_doubling for i in range(number)]
                return [start * Decimal(2) ** octave for octave in octaves]
            ratio = decimal(self.ratio or 0.0)
            return [start * ratio**i for i in range(number)]


class AngleRule(Section):
    """Angles in constant steps."""

    start: float = setting("First scattering angle.", alias="from", unit="deg", ge=0.0, le=180.0)
    end: float = setting("Last scattering angle.", alias="to", unit="deg", ge=0.0, le=180.0)
    step: float = setting("Step; it must divide the range.", unit="deg", ge=0.01, le=180.0)

    @model_validator(mode="after")
    def _check(self) -> AngleRule:
        if self.start >= self.end:
            raise wrong(
                f"the range runs from {self.start:g} to {self.end:g} degrees",
                "give a 'to' that is larger than 'from'",
                "to",
            )
        span = decimal(self.end) - decimal(self.start)
        if span % decimal(self.step) != 0:
            raise wrong(
                f"a step of {self.step:g} degrees does not divide the range of {float(span):g}",
                f"give a step that goes into {float(span):g} degrees a whole number of times",
                "step",
            )
        return self

    def values(self) -> list[Decimal]:
        """Return the angles in degrees, ascending."""
        start, step = decimal(self.start), decimal(self.step)
        number = int((decimal(self.end) - start) / step) + 1
        return [start + i * step for i in range(number)]


def ascending(name: str, values: Sequence[float]) -> None:
    """Raise for the first value of a list that does not exceed the one before it."""
    for position in range(1, len(values)):
        if values[position] <= values[position - 1]:
            what = "repeats" if values[position] == values[position - 1] else "comes after"
            raise wrong(
                f"{values[position]:g} {what} {values[position - 1]:g} in {name}",
                "give every value once, in ascending order",
                position,
            )


def decimal(value: float) -> Decimal:
    """Return the decimal number that was written for `value` (its shortest form)."""
    return Decimal(repr(float(value)))


def grid_values(grid: SizeGrid | AngleGrid) -> list[Decimal]:
    """Return the values of a list or rule as decimals."""
    if isinstance(grid, list):
        return [decimal(value) for value in grid]
    return grid.values()


_Size = Annotated[float, setting("One size.", unit="size", ge=1e-6, le=1e6)]
_Angle = Annotated[float, setting("One angle.", unit="deg", ge=0.0, le=180.0)]
_SizeList = Annotated[list[_Size], setting("Sizes.", min_length=1, max_length=MOST_SIZES)]
_AngleList = Annotated[list[_Angle], setting("Angles.", min_length=1, max_length=MOST_ANGLES)]

SizeGrid = Annotated[
    Annotated[_SizeList, Tag("list")] | Annotated[SizeRule, Tag("rule")], ListOrRule
]
AngleGrid = Annotated[
    Annotated[_AngleList, Tag("list")] | Annotated[AngleRule, Tag("rule")], ListOrRule
]
