"""Pack a campaign into one file: a zip archive that is an RO-Crate of a workflow run.

The metadata follow RO-Crate 1.1 and the Workflow Run Crate profile 0.5. Beside them lie the
campaign as it was written and with all defaults, the optical constants it read, the lock of
the software, the workflow, and, as wanted, the table and what was made of it. A manifest
names the length and SHA-256 of every file.
"""

from __future__ import annotations

import hashlib
import json
import re
import subprocess
import zipfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import scatterloom
from scatterloom.campaign import Campaign
from scatterloom.campaign.loader import KEPT_SOLIDS
from scatterloom.errors import EnvironmentProblem, IntegrityError
from scatterloom.solids import kept
from scatterloom.store.atomic import atomic_write
from scatterloom.store.commit import verify_folder
from scatterloom.store.layout import Layout, checkout
from scatterloom.store.provenance import now

METADATA = "ro-crate-metadata.json"
MANIFEST = "manifest.json"
MERGED = "merged.yaml"
TABLE = "table.zarr"
FORMAT_VERSION = 1

_BLOCK = 1 << 20
_PROFILES = {
    "https://w3id.org/ro/wfrun/process/0.5": "Process Run Crate",
    "https://w3id.org/ro/wfrun/workflow/0.5": "Workflow Run Crate",
    "https://w3id.org/workflowhub/workflow-ro-crate/1.0": "Workflow RO-Crate",
}
_WORDS = {
    "Snakefile": "The workflow",
    "campaign.yaml": "The campaign as it was written",
    MERGED: "The campaign with all defaults and all optical constants, which stands alone",
    "requirements.lock": "The software with versions and hashes",
    "code.json": "Version and revision of the program",
    "audit.json": "Results of the physical checks",
    "report.html": "The report",
}
_TYPES = {
    ".json": "application/json",
    ".yaml": "application/yaml",
    ".html": "text/html",
    ".csv": "text/csv",
    ".lock": "text/plain",
    ".smk": "text/plain",
    ".npz": "application/zip",
}


@dataclass(frozen=True)
class Packed:
    """What was packed: the archive, its files and their bytes before compression."""

    path: Path
    files: int
    bytes: int


def pack(campaign: Campaign, layout: Layout, target: Path, *, with_table: bool = True) -> Packed:
    """Write the archive `target`, which appears whole or not at all.

    Raises
    ------
    EnvironmentProblem
        If this is no checkout, whose workflow and lock belong into the archive.
    IntegrityError
        If the table is wanted and not as it was committed, or there is none.
    """
    top = checkout()
    if top is None:
        raise EnvironmentProblem("packing needs a checkout of scatterloom (for workflow and lock)")
    if with_table:
        verify_folder(layout.table)
    files = dict(_sources(campaign, layout, top, with_table))
    texts = {
        MERGED: campaign.merged_yaml().encode(),
        "code.json": json.dumps(_code(top), indent=1, sort_keys=True).encode(),
    } | {
        f"{KEPT_SOLIDS}/{kept.file_name(digest)}": kept.packed(kept.recall(digest))
        for digest in campaign.contents
    }
    listed: dict[str, dict[str, Any]] = {}
    with (
        atomic_write(target) as stream,
        zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as archive,
    ):
        for name, source in sorted(files.items()):
            listed[name] = _add_file(archive, name, source)
        metadata = crate_metadata(campaign, layout, sorted([*files, *texts, MANIFEST]))
        texts[METADATA] = json.dumps(metadata, indent=1).encode()
        for name, content in sorted(texts.items()):
            archive.writestr(_entry(name), content)
            digest = hashlib.sha256(content).hexdigest()
            listed[name] = {"bytes": len(content), "sha256": digest}
        manifest = {"format_version": FORMAT_VERSION, "files": listed}
        archive.writestr(_entry(MANIFEST), json.dumps(manifest, indent=1, sort_keys=True))
    return Packed(target, len(listed) + 1, sum(entry["bytes"] for entry in listed.values()))


def _sources(
    campaign: Campaign, layout: Layout, top: Path, with_table: bool
) -> Iterator[tuple[str, Path]]:
    yield "campaign.yaml", campaign.path
    yield "Snakefile", top / "Snakefile"
    for rule in sorted((top / "workflow" / "rules").glob("*.smk")):
        yield f"workflow/rules/{rule.name}", rule
    yield "requirements.lock", top / "requirements.lock"
    for name, material in campaign.model.materials.items():
        if material.table is not None:
            yield f"materials/{_safe(name)}.csv", campaign.path.parent / material.table
    for path in (layout.audit, layout.report):
        if path.exists():
            yield path.name, path
    if with_table:
        for path in sorted(layout.table.rglob("*")):
            if path.is_file():
                yield f"{TABLE}/{path.relative_to(layout.table).as_posix()}", path


def _safe(name: str) -> str:
    return re.sub(r"[^A-Za-z0-9_-]", "_", name)


def _entry(name: str) -> zipfile.ZipInfo:
    # The same bytes give the same archive: no dates, owners or modes of this machine.
    entry = zipfile.ZipInfo(name, (1980, 1, 1, 0, 0, 0))
    entry.compress_type = zipfile.ZIP_DEFLATED
    entry.external_attr = 0o100644 << 16
    return entry


def _add_file(archive: zipfile.ZipFile, name: str, source: Path) -> dict[str, Any]:
    whole, length = hashlib.sha256(), 0
    entry = _entry(name)
    if name.startswith(f"{TABLE}/"):
        entry.compress_type = zipfile.ZIP_STORED  # chunks are compressed already
    try:
        with open(source, "rb") as stream, archive.open(entry, "w", force_zip64=True) as out:
            while block := stream.read(_BLOCK):
                whole.update(block)
                length += len(block)
                out.write(block)
    except FileNotFoundError:
        raise IntegrityError(f"{source}: the file is missing") from None
    return {"bytes": length, "sha256": whole.hexdigest()}


def _code(top: Path) -> dict[str, Any]:
    """Version of the program and, from a clone, the revision and whether it was altered."""
    code: dict[str, Any] = {"version": scatterloom.__version__, "revision": None, "altered": None}
    git = ["git", "-C", str(top)]
    try:
        head = subprocess.run([*git, "rev-parse", "HEAD"], capture_output=True, text=True)
        state = subprocess.run([*git, "status", "--porcelain"], capture_output=True, text=True)
    except OSError:
        return code
    if head.returncode == 0 and state.returncode == 0:
        code |= {"revision": head.stdout.strip(), "altered": bool(state.stdout.strip())}
    return code


def crate_metadata(campaign: Campaign, layout: Layout, names: list[str]) -> dict[str, Any]:
    """Return the metadata of the crate as JSON-LD in one flat list of entities."""
    stated = campaign.model.provenance
    license_ = stated.license or "https://spdx.org/licenses/BSD-3-Clause"
    if not license_.startswith("http"):
        license_ = f"https://spdx.org/licenses/{license_}"
    whole = [name for name in names if not name.startswith(f"{TABLE}/")]
    table = [name for name in names if name.startswith(f"{TABLE}/")]
    results = [name for name in ("audit.json", "report.html") if name in names]
    outputs = [{"@id": f"{TABLE}/"}] if table else []
    outputs += [{"@id": name} for name in results]
    agent = stated.creator or "the person who ran the campaign"
    date = now()
    root: dict[str, Any] = {
        "@id": "./",
        "@type": "Dataset",
        "conformsTo": [{"@id": profile} for profile in _PROFILES],
        "name": campaign.model.title,
        "description": stated.summary
        or f"Scattering campaign '{campaign.name}': its configuration, software and results.",
        "datePublished": date,
        "license": {"@id": license_},
        "author": {"@id": "#agent"},
        "mainEntity": {"@id": "Snakefile"},
        "mentions": {"@id": "#run"},
        "hasPart": [{"@id": name} for name in whole] + ([{"@id": f"{TABLE}/"}] if table else []),
    }
    if stated.keywords:
        root["keywords"] = ", ".join(stated.keywords)
    graph: list[dict[str, Any]] = [
        {
            "@id": METADATA,
            "@type": "CreativeWork",
            "about": {"@id": "./"},
            "conformsTo": [
                {"@id": "https://w3id.org/ro/crate/1.1"},
                {"@id": "https://w3id.org/workflowhub/workflow-ro-crate/1.0"},
            ],
        },
        root,
        *(
            {"@id": profile, "@type": ["CreativeWork", "Profile"], "name": name, "version": "0.5"}
            for profile, name in _PROFILES.items()
        ),
        {"@id": license_, "@type": "CreativeWork", "name": license_.rsplit("/", 1)[-1]},
        {"@id": "#agent", "@type": "Person", "name": agent},
        _language(),
        {
            "@id": "#campaign-file",
            "@type": "FormalParameter",
            "additionalType": "File",
            "conformsTo": {"@id": "https://bioschemas.org/profiles/FormalParameter/1.0-RELEASE"},
            "name": "campaign",
            "description": "The campaign file",
            "valueRequired": True,
            "encodingFormat": "application/yaml",
        },
        {
            "@id": "#run",
            "@type": "CreateAction",
            "name": f"Run of campaign '{campaign.name}'",
            "description": "Every case of the campaign solved and gathered into one table.",
            "instrument": {"@id": "Snakefile"},
            "agent": {"@id": "#agent"},
            "object": {"@id": MERGED},
            "result": outputs,
            "startTime": _began(layout) or date,
            "endTime": _ended(layout) or date,
            "actionStatus": "http://schema.org/CompletedActionStatus",
        },
        *(_file(name) for name in whole),
    ]
    if table:
        graph.append(
            {
                "@id": f"{TABLE}/",
                "@type": "Dataset",
                "name": "The table",
                "description": "Scattering matrices and efficiencies, a Zarr version 3 hierarchy",
            }
        )
    return {"@context": "https://w3id.org/ro/crate/1.1/context", "@graph": graph}


def _language() -> dict[str, Any]:
    return {
        "@id": "https://w3id.org/workflowhub/workflow-ro-crate#snakemake",
        "@type": "ComputerLanguage",
        "name": "Snakemake",
        "identifier": {"@id": "https://doi.org/10.1093/bioinformatics/bts480"},
        "url": {"@id": "https://snakemake.readthedocs.io"},
    }


def _file(name: str) -> dict[str, Any]:
    entity: dict[str, Any] = {
        "@id": name,
        "@type": "File",
        "name": _WORDS.get(name, name),
        "encodingFormat": _TYPES.get(Path(name).suffix, "text/plain"),
    }
    if name == MERGED:
        entity["exampleOfWork"] = {"@id": "#campaign-file"}
    if name == "Snakefile":
        entity |= {
            "@type": ["File", "SoftwareSourceCode", "ComputationalWorkflow"],
            "programmingLanguage": {"@id": _language()["@id"]},
            "version": scatterloom.__version__,
            "input": {"@id": "#campaign-file"},
            "conformsTo": {
                "@id": "https://bioschemas.org/profiles/ComputationalWorkflow/1.0-RELEASE"
            },
        }
    return entity


def _began(layout: Layout) -> str | None:
    return _time_of(layout.config)


def _ended(layout: Layout) -> str | None:
    return _time_of(layout.receipt)


def _time_of(path: Path) -> str | None:
    from datetime import UTC, datetime

    try:
        moment = datetime.fromtimestamp(path.stat().st_mtime, UTC)
    except OSError:
        return None
    return moment.isoformat(timespec="seconds")
