"""What every section of the configuration has in common.

A section is one pydantic model; `setting` describes a key with its unit and bounds, and
the messages, the JSON schema and the reference page are all made from that description.
"""

from __future__ import annotations

import re
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field
from pydantic_core import PydanticCustomError

UNIT_NAMES = {
    "um": "um",
    "deg": "degrees",
    "s": "seconds",
    "g cm-3": "g/cm3",
    "1": "",
    "size": "",
    "min": "minutes",
    "GiB": "GiB",
}
"""Units of the configuration and how they read in a sentence; a size is in um or has no unit."""


class Section(BaseModel):
    """One section: unknown keys, conversions between types, NaN and infinity are refused."""

    model_config = ConfigDict(
        extra="forbid", strict=True, frozen=True, allow_inf_nan=False, validate_default=True
    )


def setting(
    description: str,
    default: Any = ...,
    *,
    unit: str | None = None,
    form: str | None = None,
    advice: str | None = None,
    **constraints: Any,
) -> Any:
    """Describe a key.

    Parameters
    ----------
    description : str
        One sentence for the reference page.
    default : object, optional
        Value if the key is missing; a key without default is required.
    unit : str, optional
        A key of `UNIT_NAMES`; "1" for a number without unit.
    form : str, optional
        What is expected, in words, where bounds cannot say it.
    advice : str, optional
        Added to the hint of every message about this key.
    **constraints
        Bounds as pydantic names them: ge, gt, le, lt, min_length, max_length, pattern, alias.
    """
    extra = {"unit": unit, "form": form, "advice": advice}
    known: dict[str, Any] = {name: value for name, value in extra.items() if value is not None}
    return Field(default, description=description, json_schema_extra=known or None, **constraints)


def wrong(message: str, hint: str, *at: str | int) -> PydanticCustomError:
    """Make the error of a section's own check; `at` leads from the section to the culprit."""
    context = {"message": message, "hint": hint, "at": list(at)}
    return PydanticCustomError("section", "{message}", context)


NAME_FORM = "a name of at most 63 letters, digits and underscores that starts with a letter"

Name = Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_]{0,62}$")]
"""Names become coordinates of the table and parts of file names."""

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,62}")


def check_names(names: list[str]) -> None:
    """Raise for the first key of a mapping that is not a `Name`."""
    for name in names:
        if not _NAME.fullmatch(name):
            raise wrong(
                f"{name!r} cannot be a name",
                "use at most 63 letters, digits and underscores, starting with a letter",
                name,
            )
