"""`scatterloom audit`: does the table obey the laws of physics, and how accurate is it?"""

from __future__ import annotations

import argparse
import json
from typing import Any

from scatterloom.commands import COMMANDS

NAME = "audit"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument("--json", action="store_true", help="write the result as JSON")


def execute(args: argparse.Namespace) -> int:
    """Audit the table and write audit.json; 1 if a case failed, was warned of or is flagged."""
    from scatterloom.campaign import load
    from scatterloom.scattering.audit_table import audit_table
    from scatterloom.store.atomic import atomic_write
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.table import open_table

    campaign = load(args.config)
    layout = Layout(results_root(args.results) / campaign.name)
    result = audit_table(open_table(layout.table), campaign.model.accuracy.model_dump())
    text = json.dumps(result, indent=1, allow_nan=False)
    with atomic_write(layout.audit) as stream:
        stream.write(text.encode())
    print(text if args.json else "\n".join(summary(result)))
    return 0 if result["passed"] else 1


def summary(result: dict[str, Any]) -> list[str]:
    """Put an audit on one screen.

    Parameters
    ----------
    result : dict
        What `audit_table` returns.
    """
    cells = result["cells"]
    counts = ", ".join(f"{n} {name.replace('_', ' ')}" for name, n in cells.items() if n)
    lines = [f"campaign {result['campaign']}: {sum(cells.values())} cells, {counts}"]
    for name, count in result["warnings"].items():
        lines.append(f"  warning {name.replace('_', ' ')}: {count}")
    lines.append(f"{'physical check':<54}{'flagged':>8}{'judged':>8}  worst (error bars)")
    for check in result["checks"]:
        lines.append(
            f"{check['statement']:<54}{check['flagged']:>8}{check['judged']:>8}  {_worst(check)}"
        )
    lines.append(f"{'95 % half widths':<58}{'asked':>8}{'median':>9}{'worst':>9}{'wider':>9}")
    for row in result["accuracy"]:
        median, worst = ("-" if row[k] is None else f"{row[k]:.2g}" for k in ("median", "worst"))
        lines.append(
            f"{row['statement']:<58}{row['asked']:>8.2g}{median:>9}{worst:>9}{row['above']:>9}"
        )
    lines.append(_budget(result["budget"]))
    if result["passed"]:
        lines[0] += "; all checks passed"
    else:
        lines.append(_verdict(result))
    return lines


def _budget(rows: list[dict[str, Any]]) -> str:
    """Name the median parts of the half width of F11 and what the extrapolation is worth."""
    from scatterloom.scattering.error_bars import BUDGET

    median = {row["name"]: row["median"] for row in rows}
    text = {name: "-" if value is None else f"{value:.1g}" for name, value in median.items()}
    parts = ", ".join(f"{part} {text[f'f11_error_{part}']}" for part in BUDGET)
    disagreement = text["extrapolation_disagreement"]
    return f"median F11 half width: {parts}; fits differ by {disagreement} of their step"


def _worst(check: dict[str, Any]) -> str:
    if check["worst"] is None:
        return "not judged" if check["not_judged"] else "-"
    text = f"{check['worst']:.2g}"
    if check["flagged"]:
        case = check["worst_case"]
        text += (
            f" at {case['particle']}, {case['wavelength_um']:g} um, "
            f"size parameter {case['size_parameter']:.4g}"
        )
    return text


def _verdict(result: dict[str, Any]) -> str:
    cells = result["cells"]
    parts = {
        "deviations beyond the error bar": result["flagged"],
        "cases solved with a warning": cells["solved_with_warning"],
        "others with wider half widths than asked": result["short"],
        "cases failed": cells["failed"],
        "cases missing": cells["missing"],
    }
    return "not passed: " + ", ".join(f"{n} {words}" for words, n in parts.items() if n)
