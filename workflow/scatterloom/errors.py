"""The exceptions that users meet, each with the exit code of the command line.

Codes: 0 done; 1 finished, some cases failed or flagged; 2 bad input; 3 environment,
disk or memory; 4 integrity; 75 campaign held by another run; 130 interrupted.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


def visible(text: str) -> str:
    """Write control characters as escapes, so that no file can drive the user's terminal."""
    return "".join(
        c if c.isprintable() else c.encode("unicode_escape", "surrogatepass").decode("ascii")
        for c in text
    )


@dataclass(frozen=True)
class Problem:
    """One thing wrong with an input file, and what would be right.

    Attributes
    ----------
    file : str
        File name as the user gave it.
    line, column : int or None
        Position counted from one; None where a position makes no sense (missing file).
    message : str
        What is wrong, naming the key.
    found, hint : str or None
        What stands in the file, and what would be right (bound and unit included).
    """

    file: str
    line: int | None
    column: int | None
    message: str
    found: str | None = None
    hint: str | None = None

    def __str__(self) -> str:
        place = ":".join(str(part) for part in (self.file, self.line, self.column) if part)
        text = f"{visible(place)}: {visible(self.message)}"
        if self.found is not None:
            text += f"\n  found: {visible(self.found)}"
        if self.hint is not None:
            text += f"\n  hint: {visible(self.hint)}"
        return text


class ScatterloomError(Exception):
    """Base of every error that is shown to the user as a message, without a traceback."""

    exit_code = 1


class BadInput(ScatterloomError):
    """Something the user wrote cannot be used; holds every problem found.

    Parameters
    ----------
    problems : str or iterable of Problem
        One message, or all problems in the order in which they are to be shown.
    """

    exit_code = 2

    def __init__(self, problems: str | Iterable[Problem]) -> None:
        self.problems: tuple[Problem, ...] = ()
        if isinstance(problems, str):
            super().__init__(problems)
        else:
            self.problems = tuple(problems)
            super().__init__("\n".join(str(problem) for problem in self.problems))


class EnvironmentProblem(ScatterloomError):
    """The machine lacks something: a program, disk space, memory, a permission."""

    exit_code = 3


class IntegrityError(ScatterloomError):
    """A file of results is incomplete or altered."""

    exit_code = 4


class CampaignHeld(ScatterloomError):
    """Another run is working on this campaign."""

    exit_code = 75
