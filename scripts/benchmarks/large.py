"""A large soft sphere, one plane wave: memory, products by start, errors against Mie."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import numpy as np
from numba import set_num_threads
from numpy.typing import NDArray

from benchmarks.output import Result
from oracles import mie
from scatterloom.campaign.memory import single_bytes
from scatterloom.limits import forget_peak, peak_bytes
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.transition.single import Beam, SingleParticle, plane_directions
from scatterloom.waves.parity import parity_parts

X, INDEX = 100.0, 1.05
CELLS_PER_WAVELENGTH = 8.0
RESIDUAL = 1e-4
ANGLES_DEG = np.linspace(0.0, 180.0, 721)
STARTS = ("zero", "plane wave", "straight rays")


def _straight_rays(points: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Field polarized along x with the phase of straight rays along z through a sphere."""
    half = np.sqrt(np.maximum(X**2 - points[:, 0] ** 2 - points[:, 1] ** 2, 0.0))
    path = np.clip(points[:, 2] + half, 0.0, None)
    phase = np.exp(1j * (points[:, 2] + (INDEX - 1.0) * path))
    return np.stack([phase, np.zeros_like(phase), np.zeros_like(phase)])


def _start(particle: SingleParticle, beam: Beam, name: str) -> NDArray | None:
    if name == "zero":
        return None
    if name == "plane wave":
        return particle.rooted(particle.incident(beam, beam.theta))
    parts = parity_parts(_straight_rays, particle.points, particle.signs)
    return particle.rooted(parts)


def run(threads: int) -> Result:
    """Solve from each start; the last columns compare with the Mie series."""
    set_num_threads(threads)
    cells = 2 * int(np.ceil(0.5 * 2.0 * X * INDEX / (2.0 * np.pi) * CELLS_PER_WAVELENGTH))
    predicted = single_bytes((1.0, 1.0, 1.0), 3, cells)
    exact = mie.sphere(INDEX, X)
    _, s2 = exact.amplitudes(ANGLES_DEG)
    forget_peak()
    begun = time.perf_counter()
    grid = lattice(from_spec({"kind": "sphere"}), cells)
    particle = SingleParticle(grid, INDEX, X, threads=threads)
    prepared = time.perf_counter() - begun
    beam = Beam.from_angles(0.0, 0.0)
    directions = plane_directions(beam, 0.0, ANGLES_DEG)
    rows: list[dict[str, Any]] = []
    curve = np.zeros(0)
    for name in STARTS:
        begun = time.perf_counter()
        found = particle.solve(beam, beam.theta, directions, RESIDUAL, _start(particle, beam, name))
        into = np.cos(np.radians(ANGLES_DEG))[:, None] * beam.theta
        along = into - np.sin(np.radians(ANGLES_DEG))[:, None] * beam.direction
        seen = -1j * np.einsum("dq,dq->d", along, found.amplitude)
        curve = np.abs(seen) ** 2
        forward = ANGLES_DEG <= 30.0
        ratio = curve / np.abs(s2) ** 2
        rows.append(
            {
                "start": name,
                "products": found.iterate.products,
                "first residual": found.iterate.start_residual,
                "residual": found.iterate.residual,
                "seconds": time.perf_counter() - begun,
                "Qext error percent": 100.0
                * (found.extinction / (np.pi * X**2) / exact.extinction_efficiency - 1.0),
                "S2 error over forward": float(np.abs(seen - s2).max() / np.abs(s2[0])),
                "F11 rms percent to 30 deg": 100.0
                * float(np.sqrt(np.mean((ratio[forward] - 1.0) ** 2))),
                "F11 rms of log10, all angles": float(np.sqrt(np.mean(np.log10(ratio) ** 2))),
                "memory predicted GB": predicted / 1e9,
                "memory used GB": peak_bytes() / 1e9,
            }
        )
    return Result(
        rows,
        [
            f"Sphere, x = {X:g}, m = {INDEX:g}, {cells} cells across "
            f"({CELLS_PER_WAVELENGTH:g} per wavelength inside), {len(grid.cell)} cells, one "
            f"polarization, single precision; lattice and matrix took {prepared:.0f} s.",
            f"Conjugate orthogonal conjugate residuals to a relative residual of {RESIDUAL:g}. "
            "'plane wave' takes the incident field for the exciting one, 'straight rays' gives it "
            "the phase of a straight ray through the sphere.",
            "Errors against the Mie series, of the one lattice; the intensity is that of light "
            "polarized in the scattering plane. Backwards it is a millionth of that forwards.",
            "Memory is that of the process; a prediction made before anything is allocated.",
        ],
        lambda path: _draw(path, curve, np.abs(s2) ** 2),
    )


def _draw(path: Path, ours: NDArray, exact: NDArray) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(figsize=(7, 4))
    axes.semilogy(ANGLES_DEG, exact, color="0.6", linewidth=2.5, label="Mie series")
    axes.semilogy(ANGLES_DEG, ours, color="#0058a3", linewidth=0.9, label="lattice")
    axes.set_xlabel("scattering angle (deg)")
    axes.set_ylabel(r"$|S_2|^2$")
    axes.set_xlim(0, 180)
    axes.legend()
    figure.tight_layout()
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
