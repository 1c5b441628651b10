"""Notes of the cases that gave no result, so that nobody has to read a million records."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from pathlib import Path

from scatterloom.scattering.reasons import reason_of
from scatterloom.scattering.record import CaseRecord
from scatterloom.store.atomic import atomic_write


@dataclass(frozen=True)
class Failure:
    """A case without a result.

    Attributes
    ----------
    digest, job : str
    shape : str
        Canonical JSON.
    size_parameter : float
    number : int
        Of the reason.
    flag, meaning, advice : str
        The reason by name and in words, and what to change.
    """

    digest: str
    job: str
    shape: str
    size_parameter: float
    number: int
    flag: str
    meaning: str
    advice: str


def write_failure(path: Path, case: CaseRecord, job: str) -> None:
    """Note a failed case."""
    reason = reason_of(case.warning_flags)
    note = Failure(case.digest, job, case.shape, case.size_parameter, **asdict(reason))
    with atomic_write(path, durable=False) as stream:
        stream.write(json.dumps(asdict(note)).encode())


def read_failures(folder: Path) -> list[Failure]:
    """Return the notes in a folder, ordered by reason and size; unreadable ones are left out.

    They only spare reading the records, which say the same.
    """
    found = []
    for path in folder.glob("*.json"):
        try:
            note = Failure(**json.loads(path.read_bytes()))
        except (OSError, ValueError, TypeError, RecursionError):
            continue
        texts = (note.digest, note.job, note.shape, note.flag, note.meaning, note.advice)
        sound = all(isinstance(text, str) and text.isprintable() for text in texts)
        if sound and type(note.number) is int and type(note.size_parameter) in (int, float):
            found.append(note)
    return sorted(found, key=lambda note: (note.number, note.shape, note.size_parameter))
