"""The incident block of a lattice particle: a^1/2 E of every wave, sorted into sectors."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.dipole.product import LatticeMatrix
from scatterloom.dipole.sectors import Sectors
from scatterloom.particle.lattice import Lattice
from scatterloom.waves.basis import WaveBasis
from scatterloom.waves.fields import wave_fields


@dataclass(frozen=True)
class IncidentBlock:
    """Right-hand sides of one lattice particle.

    Attributes
    ----------
    basis : WaveBasis
    sectors : Sectors
        To which the entries of the following lists belong.
    members : list of int64 (n_wave_of_sector,)
        Indices into the basis of the waves of each sector.
    rows : list of complex (n_wave_of_sector, n_row_of_sector)
        ``a^1/2 E``, scaled so that products of rows are those on the whole particle.
    norms : list of float64 (n_wave_of_sector,)
    """

    basis: WaveBasis
    sectors: Sectors
    members: list[NDArray[np.int64]]
    rows: list[NDArray]
    norms: list[NDArray[np.float64]]

    def of_all_waves(
        self, amplitudes: Sequence[NDArray]
    ) -> tuple[list[NDArray[np.int64]], list[NDArray]]:
        """Members and amplitudes with those of the images of sectors added."""
        image, sign = self.basis.exchanged()
        members, blocks = list(self.members), list(amplitudes)
        for sector, member, block in zip(self.sectors.all, self.members, amplitudes, strict=True):
            if sector.copies == 2:
                members.append(image[member])
                blocks.append(sign[member, None] * block * sign[member])
        return members, blocks


@njit(cache=True)
def _rooted(fields, member, root, factor, out):  # type: ignore[no-untyped-def]
    """Fields of the waves `member` times a factor and a^1/2, components xx, yy, zz, xy, xz, yz."""
    for w in range(len(member)):
        x, y, z = fields[member[w], 0], fields[member[w], 1], fields[member[w], 2]
        for q, (a, b, c) in enumerate(((0, 3, 4), (3, 1, 5), (4, 5, 2))):
            for o in range(out.shape[2]):
                value = root[a, o] * x[o] + root[b, o] * y[o] + root[c, o] * z[o]
                out[w, q, o] = factor * value


def incident_block(
    lattice: Lattice,
    matrix: LatticeMatrix,
    size_parameter: float,
    basis: WaveBasis,
    sectors: Sectors | None = None,
) -> IncidentBlock:
    """Incident waves of the basis on the cells of a lattice particle.

    Without `sectors`, those are the parity classes.
    """
    points = size_parameter * lattice.centre()[matrix.fundamental]
    fields = wave_fields(basis, points)
    root = matrix.root
    class_of = basis.class_of(lattice.mirrors)
    exchange = basis.exchanged()[1]
    sectors = Sectors(matrix) if sectors is None else sectors
    members, rows, norms = [], [], []
    images = np.sqrt(float(matrix.n_class))
    for sector in sectors.all:
        chosen = class_of == sector.parity
        if sector.exchange:
            chosen &= exchange == sector.exchange
        member = np.flatnonzero(chosen)
        block = np.empty((len(member), 3, matrix.n_cell), dtype=matrix.dtype)
        _rooted(fields, member, root, images, block)
        flat = sectors.part(sector, block.reshape(len(member), 3 * matrix.n_cell))
        members.append(member)
        rows.append(flat)
        norms.append(np.linalg.norm(flat, axis=1).astype(np.float64))
    return IncidentBlock(basis, sectors, members, rows, norms)
