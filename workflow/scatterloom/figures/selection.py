"""What a figure takes from a table: one particle at one wavelength, sizes worth showing."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.record import has_result

if TYPE_CHECKING:
    import xarray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Ladder:
    """All sizes of one particle at one wavelength, loaded.

    Attributes
    ----------
    particle : str
    wavelength_um : float
    index : complex
        Refractive index relative to the medium.
    angle_deg : float64 (n_angle,)
    size_parameter, radius_um : float64 (n_size,)
    solved : bool (n_size,)
    matrix, half_width : float64 (n_size, n_angle, 4, 4)
        NaN where not solved.
    ratio_half_width : float64 (n_size, n_angle, 4, 4)
        Of the elements over F11; of F11 the relative half width.
    """

    particle: str
    wavelength_um: float
    index: complex
    angle_deg: FloatArray
    size_parameter: FloatArray
    radius_um: FloatArray
    solved: NDArray[np.bool_]
    matrix: FloatArray
    half_width: FloatArray
    ratio_half_width: FloatArray

    @property
    def stem(self) -> str:
        """Part of file names."""
        return f"{self.particle}-{self.wavelength_um:g}um"

    @property
    def words(self) -> str:
        """How captions call it."""
        n, k = self.index.real, self.index.imag
        index = f"{n:.4g} + {k:.3g}i" if k else f"{n:.4g}"
        return (
            f"{self.particle} (relative index {index}) at a wavelength of {self.wavelength_um:g} µm"
        )


def load_ladder(table: xarray.Dataset, particle: int, wavelength: int) -> Ladder:
    """Load one particle at one wavelength.

    Parameters
    ----------
    table : xarray.Dataset
    particle, wavelength : int
        Positions.
    """
    part = table.isel(particle=particle, wavelength=wavelength)
    status = np.asarray(part["status"].values)
    return Ladder(
        particle=str(part["particle"].values),
        wavelength_um=float(part["wavelength"]),
        index=complex(float(part["refractive_index_n"]), float(part["refractive_index_k"])),
        angle_deg=np.asarray(part["angle"].values, dtype=np.float64),
        size_parameter=np.asarray(part["size_parameter"].values, dtype=np.float64),
        radius_um=np.asarray(part["radius_um"].values, dtype=np.float64),
        solved=has_result(status),
        matrix=np.asarray(part["scattering_matrix"].values, dtype=np.float64),
        half_width=np.asarray(part["scattering_matrix_error"].values, dtype=np.float64),
        ratio_half_width=np.asarray(part["scattering_matrix_ratio_error"].values, dtype=np.float64),
    )


def spread_sizes(ladder: Ladder, count: int) -> NDArray[np.intp]:
    """Choose up to `count` solved sizes, evenly in the logarithm, both ends included."""
    solved = np.flatnonzero(ladder.solved)
    if solved.size <= count:
        return solved
    u = np.log(ladder.size_parameter[solved])
    wanted = np.linspace(u[0], u[-1], count)
    return np.unique(solved[[int(np.argmin(np.abs(u - w))) for w in wanted]])


def thinned(angles_deg: FloatArray, step_deg: float = 10.0) -> NDArray[np.intp]:
    """Positions of angles about `step_deg` apart, both ends included, for tables of numbers."""
    if angles_deg.size == 1:
        return np.array([0])
    wanted = np.arange(angles_deg[0], angles_deg[-1] + 0.5 * step_deg, step_deg)
    near = np.abs(angles_deg[:, None] - wanted).argmin(axis=0)
    return np.unique(np.append(near, angles_deg.size - 1))
