"""Phase and extinction matrices of oriented particles, in a frame with a vertical axis.

Directions are those of propagation: zenith angle from the vertical (z), azimuth about it;
light is incident at azimuth zero. Stokes vectors refer to the meridional plane of each
direction, with the component along theta in place of the one parallel to the scattering
plane, and the one against phi in place of the perpendicular one, so that signs are those of
Bohren & Huffman 1983.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.orientation.distribution import Directions, Tilts
from scatterloom.orientation.random import (
    TO_LINEAR,
    incident_waves,
    linear_products,
    mueller_from_products,
    outgoing_functions,
    sorted_rows,
    turn_functions,
)
from scatterloom.orientation.rules import reach
from scatterloom.transition.matrix import TransitionMatrix
from scatterloom.transition.rotate import turned
from scatterloom.waves.basis import WaveLabels

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]

NEGLIGIBLE = 1e-9
"""Products of amplitudes that averages over turns about the axis leave out, relative to all."""


@dataclass(frozen=True)
class Views:
    """Directions in which an ensemble is lit and seen.

    Attributes
    ----------
    incidence : float64 (n_incidence,) [rad]
        Zenith angles of incidence.
    zenith : float64 (n_zenith,) [rad]
        Of scattering.
    azimuth : float64 (n_azimuth,) [rad]
        Of scattering, relative to that of incidence.
    """

    incidence: Floats
    zenith: Floats
    azimuth: Floats


@dataclass(frozen=True)
class Oriented:
    """Averages over a distribution of orientations.

    Attributes
    ----------
    phase : float64 (n_combination, n_incidence, n_zenith, n_azimuth, 4, 4)
        Phase matrix: differential scattering cross section times k^2 in the 11 element.
    extinction : float64 (n_combination, n_incidence, 4, 4)
        Extinction matrix: extinction cross section times k^2 on the diagonal.
    """

    phase: Floats
    extinction: Floats


def oriented(
    matrices: Complex,
    labels: WaveLabels,
    weights: Floats,
    symmetry: str,
    distribution: Tilts | Directions,
    views: Views,
) -> Oriented:
    """Averages of linear combinations of transition matrices over orientation.

    Exact for the truncation up to the rule over tilts: the azimuth of the particle's axis
    and its turn about it are averaged by sums over the orders of the waves (Parseval).

    Parameters
    ----------
    matrices : complex128 (n_matrix, n_wave, n_wave)
        In the frame of the particle.
    labels : WaveLabels
    weights : float64 (n_combination, n_matrix)
    symmetry : {"sphere", "axial", "mirrors", "none"}
        Of the particle; an axial one has its axis along z.
    distribution : Tilts or Directions
    views : Views
    """
    phases, extinctions = [], []
    for incidence in views.incidence:
        pairs: Complex | complex = 0.0
        forward: Complex | complex = 0.0
        for part, still, share in _ensemble(matrices, labels, symmetry, distribution, incidence):
            seen = _seen(part, labels.n_max, views.zenith, views.azimuth)
            pairs = pairs + share * (seen @ seen.conj().swapaxes(-1, -2))
            forward = forward + share * _forward(part[:, still], labels.n_max, incidence)
        phases.append(_combined(np.asarray(pairs), weights))
        extinctions.append(_extinction(np.asarray(forward), weights))
    return Oriented(np.stack(phases, axis=1), np.stack(extinctions, axis=1))


def _ensemble(
    matrices: Complex,
    labels: WaveLabels,
    symmetry: str,
    distribution: Tilts | Directions,
    incidence: float,
) -> Iterator[tuple[Complex, slice, float]]:
    """Scattered coefficients of each member, its family of no turn, and its weight.

    complex128 (n_wave, n_family, 2 n_max + 1, hand, matrix): waves of the lab frame in the
    order of `sorted_rows`, by the order of the incident wave. Amplitudes of members of a
    family average incoherently, as do those of different differences of orders q.
    """
    n_max = labels.n_max
    at = np.array([incidence])
    lit = incident_waves(labels, turn_functions(n_max, at.tobytes()))[:, :, 0]
    if isinstance(distribution, Directions):
        for part, share in _single(matrices, labels, distribution, lit):
            yield part, slice(0, 1), share
        return
    turn = _turns(symmetry, reach(matrices, labels, NEGLIGIBLE).turn)
    first = int(np.flatnonzero(turn == 0)[0])
    for beta, weight in zip(distribution.beta, distribution.weight, strict=True):
        yield _tilted(matrices, labels, turn, beta, lit), slice(first, first + 1), weight


def _turns(symmetry: str, largest: int) -> NDArray[np.int64]:
    """Differences of the orders of scattered and incident waves in the frame of the particle."""
    if symmetry in ("sphere", "axial"):
        return np.zeros(1, dtype=np.int64)
    # Planes x = 0 and y = 0 as mirrors leave even ones only. Both signs count: they are mirror
    # images of each other, but the azimuth of scattering has a side.
    step = 2 if symmetry == "mirrors" else 1
    half = np.arange(0, largest + 1, step)
    return np.concatenate([-half[:0:-1], half])


def _single(
    matrices: Complex, labels: WaveLabels, directions: Directions, lit: Complex
) -> Iterator[tuple[Complex, float]]:
    """Members of a list: all orders of the incident wave act together, as order zero."""
    rows = sorted_rows(labels)
    for (alpha, beta, gamma), weight in zip(directions.euler, directions.weight, strict=True):
        rotation = _rotation(alpha, beta, gamma)
        out = np.stack(
            [turned(TransitionMatrix(m, labels), rotation).matrix[rows] @ lit for m in matrices],
            axis=-1,
        )
        yield out[:, None, None], float(weight)


def _rotation(alpha: float, beta: float, gamma: float) -> Floats:
    def about_z(angle: float) -> Floats:
        c, s = np.cos(angle), np.sin(angle)
        return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])

    c, s = np.cos(beta), np.sin(beta)
    tilt = np.array([[c, 0.0, s], [0.0, 1.0, 0.0], [-s, 0.0, c]])
    return about_z(alpha) @ tilt @ about_z(gamma)


def _tilted(
    matrices: Complex,
    labels: WaveLabels,
    turn: NDArray[np.int64],
    beta: float,
    lit: Complex,
) -> Complex:
    """Particles tilted by beta, their turns about their axis as families."""
    n_max, n_matrix = labels.n_max, len(matrices)
    functions = turn_functions(n_max, np.array([beta]).tobytes())
    rows = sorted_rows(labels)
    degree, order = labels.degree[rows], labels.order[rows]
    # Incident waves of lab order M' in the frame of the particle: (wave, M', hand).
    inside = np.zeros((len(rows), 2 * n_max + 1, 2), dtype=np.complex128)
    for n in range(1, n_max + 1):
        for kind in (0, 1):
            chosen = np.flatnonzero((labels.degree == n) & (labels.kind == kind))
            # Waves of one kind and degree are sorted by order.
            block = functions[n][0].T[:, :, None] * lit[chosen][None]
            inside[chosen, n_max - n : n_max + n + 1] = block
    place = np.full(4 * n_max + 1, -1)
    place[turn + 2 * n_max] = np.arange(turn.size)
    shape = (len(rows), turn.size, 2 * n_max + 1, 2, n_matrix)
    scattered = np.zeros(shape, dtype=np.complex128)
    for m in range(-n_max, n_max + 1):
        columns = np.flatnonzero(labels.order == m)
        family = place[order - m + 2 * n_max]
        kept = np.flatnonzero(family >= 0)
        block = matrices[:, rows[kept][:, None], columns].reshape(-1, columns.size)
        part = (block @ inside[columns].reshape(columns.size, -1)).reshape(
            n_matrix, kept.size, 2 * n_max + 1, 2
        )
        scattered[kept, family[kept]] = part.transpose(1, 2, 3, 0)
    for n in range(1, n_max + 1):
        here = np.flatnonzero(degree == n)
        flat = scattered[here].reshape(2 * n + 1, -1).view(np.float64)
        scattered[here] = (
            (functions[n][0] @ flat).view(np.complex128).reshape(scattered[here].shape)
        )
    return scattered


def _helicities(part: Complex, n_max: int) -> Complex:
    """Waves that make helicity o: (order, helicity, degree, family, M', hand, matrix)."""
    out = np.zeros((2 * n_max + 1, 2, n_max + 1, *part.shape[1:]), dtype=np.complex128)
    first = 0
    for n in range(1, n_max + 1):
        waves = part[first : first + 2 * (2 * n + 1)].reshape(2 * n + 1, 2, *part.shape[1:])
        first += 2 * (2 * n + 1)
        here = slice(n_max - n, n_max + n + 1)
        out[here, 0, n] = (-1j) ** n * (waves[:, 1] + waves[:, 0])
        out[here, 1, n] = (-1j) ** n * (waves[:, 1] - waves[:, 0])
    return out


def _seen(part: Complex, n_max: int, zenith: Floats, azimuth: Floats) -> Complex:
    """Amplitudes (n_zenith, n_azimuth, 4 n_matrix, sample); samples average incoherently."""
    waves = _helicities(part, n_max)
    n_family, n_incident, _, n_matrix = part.shape[1:]
    flat = waves.reshape(2 * n_max + 1, 2, n_max + 1, -1).view(np.float64)
    by_order = (outgoing_functions(n_max, np.cos(zenith).tobytes()) @ flat).view(np.complex128)
    shape = (2 * n_max + 1, 2, zenith.size, n_family, n_incident, 2, n_matrix)
    by_order = by_order.reshape(shape)
    orders = np.arange(-n_max, n_max + 1)
    spin = np.exp(1j * np.outer(azimuth, orders))
    if n_incident == 1:
        sums = np.tensordot(spin, by_order[:, :, :, :, 0], (1, 0))[..., None]
        sums = np.moveaxis(sums, -1, 4)
    else:
        # Turning the particle about the vertical multiplies by exp(-i q alpha), q = M - M'.
        aligned = np.zeros((4 * n_max + 1, *by_order.shape[:4], 2, n_matrix), np.complex128)
        for m in range(2 * n_max + 1):
            # M' runs down as q runs up.
            aligned[m : m + 2 * n_max + 1, m] = np.moveaxis(by_order[m][:, :, :, ::-1], 3, 0)
        flat_sum = spin @ aligned.reshape(4 * n_max + 1, 2 * n_max + 1, -1)
        sums = flat_sum.reshape(4 * n_max + 1, azimuth.size, *aligned.shape[2:])
        sums = np.moveaxis(sums, 0, 4)
    # (azimuth, helicity, zenith, family, q, hand, matrix)
    ordered = sums.transpose(2, 0, 1, 5, 6, 3, 4)
    return ordered.reshape(zenith.size, azimuth.size, 4 * n_matrix, -1)


def _forward(part: Complex, n_max: int, incidence: float) -> Complex:
    """Forward amplitudes (4, n_matrix), averaged: what varies with azimuth or turn vanishes.

    `part` holds the one family that does not vary with the turn about the axis.
    """
    waves = _helicities(part, n_max)[:, :, :, 0]  # (order, helicity, degree, M', hand, matrix)
    functions = outgoing_functions(n_max, np.array([np.cos(incidence)]).tobytes())[:, :, 0]
    if part.shape[2] == 1:
        sums = np.einsum("mon,monhb->ohb", functions, waves[:, :, :, 0])
    else:
        sums = np.einsum("mon,monmhb->ohb", functions, waves)
    return sums.reshape(4, -1)


def _combined(pairs: Complex, weights: Floats) -> Floats:
    """Phase matrices of combinations from products of all pairs of matrices."""
    n_zenith, n_azimuth = pairs.shape[:2]
    n_matrix = weights.shape[1]
    split = pairs.reshape(-1, 4, n_matrix, 4, n_matrix)
    combined = np.einsum("vb,txbyc,vc->vtxy", weights, split, weights, optimize=True)
    out = np.stack([mueller_from_products(linear_products(products)) for products in combined])
    return out.reshape(len(weights), n_zenith, n_azimuth, 4, 4)


_STOKES = np.array([[1, 0, 0, 1], [1, 0, 0, -1], [0, 1, 1, 0], [0, 1j, -1j, 0]])
"""Stokes vector from the products E_par E_par*, E_par E_per*, E_per E_par*, E_per E_per*.

Bohren & Huffman 1983, eq. 2.84.
"""


def _extinction(forward: Complex, weights: Floats) -> Floats:
    """Extinction matrices (n_combination, 4, 4) from forward amplitudes (4, n_matrix).

    Behind a slab of n particles an area the field is E + i (2 pi n / k^2) a E, a the forward
    amplitude times k; the Stokes vector changes by -n K (optical theorem; Mishchenko et al.
    2002, Scattering, Absorption, and Emission of Light by Small Particles, section 2.8).
    """
    amplitude = (TO_LINEAR @ forward @ weights.T).T.reshape(-1, 2, 2)
    out = []
    for a in amplitude:
        g = 2j * np.pi * a
        change = np.kron(g, np.eye(2)) + np.kron(np.eye(2), g.conj())
        out.append(-(_STOKES @ change @ (0.5 * _STOKES.conj().T)).real)
    return np.stack(out)
