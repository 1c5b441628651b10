"""Write workflow/docs/licences.md: what the program depends on, and under which licences.

Run it with the environment's own Python: .venv/bin/python scripts/licences.py
"""

from __future__ import annotations

import re
from importlib.metadata import Distribution, PackageNotFoundError, distribution
from pathlib import Path

PAGE = Path(__file__).parents[1] / "workflow" / "docs" / "licences.md"
PREAMBLE = """\
<!-- Made by `scripts/licences.py`; run it again instead of editing this page. -->
# Licences

Scatterloom itself is under the BSD 3-Clause licence (see [LICENSE](../../LICENSE)). It contains
no code of the packages below; `scripts/run` installs them from the Python Package Index, pinned
by [requirements.lock](../../requirements.lock). Licences are as the packages state them in their
own metadata; where they state none, the entry says so and the package's own files decide.

Note on ducc0: it states the GNU General Public License, version 2 or later, for the package as
a whole. Using it as a dependency leaves the licence of this source as it is, but whoever passes
on Scatterloom *together with* ducc0, in a container image for example, has to meet the terms of
that licence for the whole. This is a plain reading, not legal advice.
"""
_LONGEST = 60


def names_needed(package: str, extra: str) -> set[str]:
    """Names of the packages that `package` requires by itself (`extra` empty) or for an extra."""
    wanted = set()
    for line in distribution(package).requires or []:
        requirement, _, marker = line.partition(";")
        named = re.search(r"extra\s*==\s*['\"]([^'\"]+)['\"]", marker)
        if (named.group(1) if named else "") == extra:
            wanted.add(normal(re.match(r"[A-Za-z0-9._-]+", requirement).group()))  # type: ignore[union-attr]
    return wanted


def normal(name: str) -> str:
    """Return a package name in the form that compares (PEP 503)."""
    return re.sub(r"[-_.]+", "-", name).lower()


def with_dependencies(direct: set[str]) -> dict[str, Distribution]:
    """Installed packages that are reached from `direct`, by name; others are optional."""
    found: dict[str, Distribution] = {}
    waiting = sorted(direct)
    while waiting:
        name = waiting.pop()
        if name in found:
            continue
        try:
            found[name] = distribution(name)
        except PackageNotFoundError:
            continue
        waiting.extend(names_needed(name, ""))
    return found


def licence(package: Distribution) -> str:
    """Return the licence that a package states: expression, short text or classifiers."""
    metadata = package.metadata
    stated = metadata.get("License-Expression") or ""
    text = metadata.get("License") or ""
    if not stated and text and "\n" not in text.strip() and len(text) <= _LONGEST:
        stated = text.strip()
    if not stated:
        classifiers = [
            entry.rsplit(" :: ", 1)[1]
            for entry in metadata.get_all("Classifier") or []
            if entry.startswith("License :: ") and entry != "License :: OSI Approved"
        ]
        stated = ", ".join(classifiers)
    return stated or "not stated in the metadata"


def table(packages: dict[str, Distribution]) -> list[str]:
    """Lines of a Markdown table."""
    rows = [f"| {name} | {p.version} | {licence(p)} |" for name, p in sorted(packages.items())]
    return ["| package | version | licence |", "|---|---|---|", *rows]


def page() -> str:
    """Return the whole page."""
    direct = names_needed("scatterloom", "")
    develop = names_needed("scatterloom", "develop") - direct
    run = with_dependencies(direct)
    named = {name: p for name, p in run.items() if name in direct}
    further = {name: p for name, p in run.items() if name not in direct}
    tools = {n: p for n, p in with_dependencies(develop).items() if n not in run}
    parts = [
        PREAMBLE,
        "## Used directly\n",
        *table(named),
        "\n## Needed by these\n",
        *table(further),
        "\n## For development and tests only\n",
        *table(tools),
    ]
    return "\n".join(parts) + "\n"


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8")
    print(PAGE)
