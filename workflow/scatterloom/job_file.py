"""Job files: what `solve-job` is given."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

from scatterloom.errors import BadInput, visible
from scatterloom.scattering.case import Asked

_PLAIN_NAME = re.compile(r"[A-Za-z0-9_-]{1,100}")
_LARGEST = 1e6
_NOT_A_JOB = (OSError, ValueError, KeyError, IndexError, TypeError, AttributeError)


def read_spec(path: Path) -> dict[str, Any]:
    """Read a job file and judge it, before anything is solved or written.

    Names become names of files, so they may hold letters, digits, dashes and underscores only.

    Raises
    ------
    BadInput
        If it is no specification of a job.
    """
    try:
        spec: dict[str, Any] = json.loads(path.read_bytes())
        names = [spec["name"], *spec["needs"], *(name for _, _, name in spec["anchors"])]
        names += [digest for digest, _ in spec["cases"]]
        for name in names:
            if not isinstance(name, str) or not _PLAIN_NAME.fullmatch(name):
                raise ValueError(f"{name!r} is no name")
        if spec["kind"] not in ("anchors", "span") or not spec["cases"]:
            raise ValueError("neither anchors nor a span, or no cases")
        sizes = [float(x) for _, x in spec["cases"]] + [float(x) for _, x, _ in spec["anchors"]]
        indices = [complex(*index) for index in (spec["index"], *spec.get("inner_indices", ()))]
        numbers = [*sizes, float(spec["tolerance"]), *map(int, spec["levels"]), *map(abs, indices)]
        numbers += [float(spec["accuracy"][name]) for name in Asked.__dataclass_fields__]
        if not isinstance(spec["shape"]["kind"], str) or int(spec["refinements"]) < 0:
            raise ValueError("no shape, or no number of refinements")
        if not all(0.0 < number < _LARGEST for number in numbers):
            raise ValueError("a number is out of range")
    except (RecursionError, ArithmeticError, *_NOT_A_JOB) as error:
        reason = str(error) or type(error).__name__
        raise BadInput(f"{path}: not a job file ({visible(reason[:200])})") from None
    return spec
