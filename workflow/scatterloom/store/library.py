"""The case library: solved cases that several campaigns share.

One case file a case, in a folder beside the campaigns, named by the physics of the case and
the accuracy it was solved for, so that a look into one small folder finds every accuracy of
the same physics. A file is a hard link to the campaign's own where the file system can, so
the library takes no space; it is checked on every reading, and a damaged one is removed.
"""

from __future__ import annotations

import contextlib
import errno
import hashlib
import json
import os
import sys
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from scatterloom.campaign import effort
from scatterloom.campaign.case import canonical_json
from scatterloom.errors import IntegrityError
from scatterloom.scattering import record
from scatterloom.scattering.case import Asked, meets
from scatterloom.scattering.record import CaseRecord
from scatterloom.store.atomic import atomic_write
from scatterloom.store.casefile import read_records

_BIT = {name: bit for name, (bit, _) in record.FLAGS.items()}


def physics_digest(spec: Mapping[str, Any], size_parameter: float) -> str:
    """Digest of one case of a job without the accuracy asked.

    Parameters
    ----------
    spec : mapping
        A job specification. Overrides of the solver count as physics; what the program
        chose by itself for an accuracy does not.
    size_parameter : float
    """
    usual = effort.operator_tolerance(spec["accuracy"]["ratio_absolute"])
    content = {
        "shape": spec["shape"],
        "index": spec["index"],
        "inner_indices": spec.get("inner_indices"),
        "size_parameter": size_parameter,
        "levels": None if spec["refinements"] else spec["levels"],
        "tolerance": None if spec["tolerance"] == usual else spec["tolerance"],
        "numerics_revision": spec["numerics_revision"],
    }
    return hashlib.sha256(canonical_json(content).encode()).hexdigest()[:24]


class CaseLibrary:
    """The library in one folder.

    Parameters
    ----------
    folder : Path
        Made when the first case is added.
    """

    def __init__(self, folder: Path) -> None:
        self._folder = folder

    def _home(self, physics: str) -> Path:
        return self._folder / physics[:2] / physics[2:4]

    def find(
        self, spec: Mapping[str, Any], size_parameter: float, digest: str
    ) -> CaseRecord | None:
        """Return a record that is at least as accurate as the job asks, or None.

        A record of this very accuracy comes first; one of a higher accuracy is judged
        against what is asked here and serves if it meets it. What is returned carries the
        digest of the case and the flag "reused".
        """
        physics = physics_digest(spec, size_parameter)
        asked = _asked(spec)
        candidates = []
        with contextlib.suppress(FileNotFoundError, NotADirectoryError):
            for name in os.listdir(self._home(physics)):
                accuracy = _accuracy_in(name, physics)
                if accuracy and all(a <= b for a, b in zip(accuracy, asked, strict=True)):
                    candidates.append((accuracy, name))
        for accuracy, name in sorted(candidates, reverse=True):
            found = self._read(self._home(physics) / name, spec, size_parameter)
            if found is None:
                continue
            if accuracy != asked:
                found = _judged(found, asked)
                if found is None:
                    continue
            return replace(found, digest=digest, warning_flags=found.warning_flags | _BIT["reused"])
        return None

    def _read(
        self, path: Path, spec: Mapping[str, Any], size_parameter: float
    ) -> CaseRecord | None:
        try:
            (found,) = read_records(path)
            if json.loads(found.shape) != spec["shape"] or found.size_parameter != size_parameter:
                raise IntegrityError(f"{path}: holds another case than its name says")
        except (IntegrityError, ValueError) as error:
            print(f"{error}; removed from the case library", file=sys.stderr)
            with contextlib.suppress(OSError):
                path.unlink()
            return None
        except OSError as error:
            print(f"{path}: {error.strerror}; not reused", file=sys.stderr)
            return None
        return found if found.status != record.FAILED else None

    def add(self, spec: Mapping[str, Any], case: CaseRecord, source: Path) -> None:
        """Add a solved case, which stands in the case file `source`.

        Failed and reused cases are left out. That the library cannot be written is said
        and stops nothing: the campaign has its own file.
        """
        if case.status == record.FAILED or case.warning_flags & _BIT["reused"]:
            return
        physics = physics_digest(spec, case.size_parameter)
        accuracy = "_".join(repr(value) for value in _asked(spec))
        path = self._home(physics) / f"{physics}_{accuracy}.case"
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            try:
                os.link(source, path)
            except FileExistsError:
                return
            except OSError as error:
                if error.errno not in (errno.EXDEV, errno.EPERM, errno.EMLINK, errno.ENOTSUP):
                    raise
                with atomic_write(path) as stream:
                    stream.write(source.read_bytes())
        except OSError as error:
            print(f"{path}: {error.strerror}; not added to the case library", file=sys.stderr)


def _asked(spec: Mapping[str, Any]) -> tuple[float, float, float]:
    accuracy = spec["accuracy"]
    return (
        float(accuracy["f11_relative"]),
        float(accuracy["ratio_absolute"]),
        float(accuracy["efficiency_relative"]),
    )


def _accuracy_in(name: str, physics: str) -> tuple[float, float, float] | None:
    if not (name.startswith(physics + "_") and name.endswith(".case")):
        return None
    try:
        f11, ratio, efficiency = map(float, name.removesuffix(".case").split("_")[1:])
    except ValueError:
        return None
    return f11, ratio, efficiency


def _judged(case: CaseRecord, asked: tuple[float, float, float]) -> CaseRecord | None:
    """A record solved for a higher accuracy, flagged for this one; None if it misses it."""
    if not meets(case, Asked(*asked)):
        return None
    flags = case.warning_flags & ~_BIT["accuracy_not_met"]
    if case.checks["truncation_share"] <= 0.5 * asked[0]:
        flags &= ~_BIT["truncation"]
    warned = flags & ~record.INFORMATIVE
    status = record.SOLVED_WITH_WARNING if warned else record.SOLVED
    return replace(case, warning_flags=flags, status=status)
