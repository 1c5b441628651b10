"""`scatterloom compare`: compare a measured scattering matrix with a campaign."""

from __future__ import annotations

import argparse
import re
import sys
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from scatterloom.commands import COMMANDS

if TYPE_CHECKING:
    from scatterloom.bulk.compare import Model, Residuals
    from scatterloom.bulk.verdict import Verdict

NAME = "compare"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("measurement", metavar="MEASUREMENT", help="measured matrix (CSV, NetCDF)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument(
        "--normalize-at",
        metavar="DEG",
        type=float,
        help="angle at which F11 is set equal to the model's (default: the one nearest to 30)",
    )
    parser.add_argument(
        "--fit", action="store_true", help="fit sizes and particles of the table to it as well"
    )
    parser.add_argument(
        "--samples", metavar="N", type=int, default=100, help="of the bootstrap (default: 100)"
    )


def execute(args: argparse.Namespace) -> int:
    """Write the comparison and print chi-squares; 1 if no model fits or data can't tell."""
    from scatterloom.bulk.bulkfile import bulk_of
    from scatterloom.bulk.compare import compare
    from scatterloom.bulk.measurement import read_measurement
    from scatterloom.bulk.population import populations_of
    from scatterloom.bulk.verdict import judge
    from scatterloom.campaign import load
    from scatterloom.errors import BadInput
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.table import open_table

    if not 10 <= args.samples <= 10_000:
        raise BadInput(f"--samples must lie between 10 and 10000, found {args.samples}")
    campaign = load(args.config)
    measurement = read_measurement(args.measurement)
    layout = Layout(results_root(args.results) / campaign.name)
    table = open_table(layout.table)
    populations = populations_of(campaign.model)
    if not populations and not args.fit:
        raise BadInput(
            f"{args.config}: no populations to compare with\n"
            "  hint: add a section 'populations', or use --fit"
        )
    models: dict[str, Callable[[float], Model]] = {}
    if populations:
        bulk = bulk_of(layout.bulk, table, populations)
        models = _bulk_models(bulk, measurement.file)
    verdict = None
    if args.fit:
        verdict = judge(
            table, measurement, [p.name for p in campaign.model.particles], args.samples
        )
        models = {"fit": verdict.best.model, **models}
    if not models:
        raise BadInput(f"{args.config}: no population has an average to compare with")
    residuals = {
        name: compare(measurement, model, args.normalize_at) for name, model in models.items()
    }
    stem = re.sub(r"[^A-Za-z0-9_.-]", "-", Path(args.measurement).stem)
    folder = layout.comparisons / stem
    _write(folder, stem, measurement.wavelengths, models, residuals, verdict)
    return _say(folder, residuals, verdict)


def _bulk_models(bulk: Any, file: str) -> dict[str, Callable[[float], Model]]:
    import numpy as np

    from scatterloom.bulk.compare import Model, match_wavelength
    from scatterloom.scattering.record import has_result

    waves = np.asarray(bulk["wavelength"].values)
    out: dict[str, Callable[[float], Model]] = {}
    for i, name in enumerate(bulk["population"].values):
        part = bulk.isel(population=i).load()
        if not has_result(part["status"].values).all():
            print(
                f"scatterloom: population {name} has no average at some wavelength", file=sys.stderr
            )
            continue

        def at(wavelength_um: float, part: Any = part) -> Model:
            w = match_wavelength(wavelength_um, waves, file)
            return Model(
                np.asarray(part["angle"].values),
                np.asarray(part["scattering_matrix"].values[w]),
                np.asarray(part["scattering_matrix_error"].values[w]),
                np.asarray(part["scattering_matrix_ratio_error"].values[w]),
            )

        out[str(name)] = at
    return out


def _write(
    folder: Path,
    stem: str,
    wavelengths: Sequence[float],
    models: Mapping[str, Callable[[float], Model]],
    residuals: Mapping[str, Sequence[Residuals]],
    verdict: Verdict | None,
) -> None:
    import json

    from scatterloom.figures.measured import fitted_sizes, measured_panel
    from scatterloom.figures.picture import save, style
    from scatterloom.store.atomic import atomic_write

    folder.mkdir(parents=True, exist_ok=True)
    # The summary is written last: a folder without it was never finished.
    (folder / "comparison.json").unlink(missing_ok=True)
    with style():
        for wavelength in wavelengths:
            save(measured_panel(stem, wavelength, models, residuals), folder)
        if verdict is not None:
            save(fitted_sizes(stem, verdict), folder)
    with atomic_write(folder / "comparison.json") as stream:
        stream.write(json.dumps(_summary(residuals, verdict), indent=1).encode())


def _summary(
    residuals: Mapping[str, Sequence[Residuals]], verdict: Verdict | None
) -> dict[str, Any]:
    from scatterloom.bulk.compare import total

    out: dict[str, Any] = {"models": {}}
    for name, parts in residuals.items():
        chi_square, count, probability = total(list(parts))
        out["models"][name] = {
            "chi_square": chi_square,
            "data": count,
            "probability": probability,
            "elements": [
                {
                    "element": r.element,
                    "wavelength_um": r.wavelength_um,
                    "chi_square": r.chi_square,
                    "data": int(r.angle_deg.size),
                    "probability": r.probability,
                    "share_of_variance_from_model": r.model_share,
                }
                for r in parts
            ],
        }
    if verdict is not None:
        best = verdict.best
        intervals = {
            q: [float(end) for end in verdict.interval(q)]
            for q in ("effective_radius_um", "effective_variance")
        }
        low, high = verdict.interval("shares")
        out["fit"] = {
            "particles": {
                name: {"share_of_area": float(s), "interval": [float(a), float(b)]}
                for name, s, a, b in zip(
                    best.problem.particles, best.shares, low, high, strict=True
                )
            },
            "effective_radius_um": best.effective_radius_um,
            "effective_variance": best.effective_variance,
            "intervals_95_percent": intervals,
            "smoothing": best.strength,
            "chi_square": best.chi_square,
            "data": best.count,
            "chi_square_of_each_particle_alone": {
                name: alone.chi_square for name, alone in verdict.alone.items()
            },
            "warnings": list(verdict.warnings),
        }
    return out


def _say(
    folder: Path, residuals: Mapping[str, Sequence[Residuals]], verdict: Verdict | None
) -> int:
    from scatterloom.bulk.compare import total

    fits = False
    for name, parts in residuals.items():
        chi_square, count, probability = total(list(parts))
        fits = fits or probability > 0.01
        print(
            f"{name}: chi-square {chi_square:.1f} for {count} data, probability {probability:.2g}"
        )
        for r in parts:
            place = f"{r.element:<8}{r.wavelength_um:g} um"
            share = f"model's share of variance {100 * r.model_share:.0f} %"
            print(f"  {place}  {r.chi_square:9.1f} /{r.angle_deg.size:4d}  {share}")
    if verdict is not None:
        best = verdict.best
        low, high = verdict.interval("effective_radius_um")
        radius = best.effective_radius_um
        print(f"fit: effective radius {radius:.4g} um ({low:.4g} to {high:.4g})")
        low, high = verdict.interval("effective_variance")
        print(f"  effective variance {best.effective_variance:.3g} ({low:.3g} to {high:.3g})")
        low, high = verdict.interval("shares")
        shares = zip(best.problem.particles, best.shares, low, high, strict=True)
        for name, share, a, b in shares:
            print(f"  {name}: {share:.3f} of the projected area ({a:.3f} to {b:.3f})")
        for name, alone in verdict.alone.items():
            print(f"  {name} alone: chi-square {alone.chi_square:.1f} for {alone.count} data")
        for warning in verdict.warnings:
            print(f"scatterloom: {warning}", file=sys.stderr)
    print(folder)
    return 0 if fits and not (verdict and verdict.warnings) else 1
