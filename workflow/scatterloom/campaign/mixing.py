"""Effective media: one permittivity for a mixture finer than the wavelength can tell."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np


def maxwell_garnett(host: complex, parts: Sequence[complex], shares: Sequence[float]) -> complex:
    """Permittivity of separate small spheres in a host.

    ``(e - e_h)/(e + 2 e_h) = sum f_i (e_i - e_h)/(e_i + 2 e_h)`` (Bohren & Huffman 1983,
    section 8.5; several kinds of inclusions add up). Meant for inclusions that do not touch,
    up to some tenths of the volume, much smaller than the wavelength inside them.

    Parameters
    ----------
    host : complex
        Permittivity of the host.
    parts, shares : sequence of complex, of float (n_part,)
        Permittivities of the inclusions and their shares of the volume; the host has the rest.
    """
    polarized = sum(f * (e - host) / (e + 2.0 * host) for e, f in zip(parts, shares, strict=True))
    return complex(host * (1.0 + 2.0 * polarized) / (1.0 - polarized))


def bruggeman(host: complex, parts: Sequence[complex], shares: Sequence[float]) -> complex:
    """Permittivity of a mixture of grains of which none is the host of the others.

    The root of ``sum f_i (e_i - e)/(e_i + 2 e) = 0`` (Bruggeman 1935, Ann. Phys. 416, 636;
    Bohren & Huffman 1983, section 8.5) with a positive real part: the others lie near -e_i/2,
    where a term has its pole. Parameters as in `maxwell_garnett`; the host counts as one more part.

    Raises
    ------
    ValueError
        If there is no such root or more than one, which takes metals.
    """
    e = np.array([host, *parts], dtype=np.complex128)
    f = np.array([1.0 - sum(shares), *shares])
    # Each term times all other denominators: a polynomial in the unknown permittivity.
    total = np.zeros(1, dtype=np.complex128)
    for i in range(len(e)):
        term = f[i] * np.array([-1.0, e[i]])
        for j in range(len(e)):
            if j != i:
                term = np.convolve(term, [2.0, e[j]])
        total = np.polyadd(total, term)
    passive = [root for root in np.roots(total) if root.real > 0.0]
    if len(passive) != 1:
        raise ValueError(f"the mixture has {len(passive)} permittivities, should have one")
    root = complex(passive[0])
    # Without loss in any part there is none in the whole: rounding must not bring some in.
    return complex(root.real, max(root.imag, 0.0) if e.imag.any() else 0.0)


def volume_average(host: complex, parts: Sequence[complex], shares: Sequence[float]) -> complex:
    """Mean permittivity: exact where the field runs along layers, an upper bound without loss.

    Parameters as in `maxwell_garnett` (Wiener 1912 bound, from memory).
    """
    held = sum(f * e for e, f in zip(parts, shares, strict=True))
    return complex((1.0 - sum(shares)) * host + held)


RULES: dict[str, Callable[[complex, Sequence[complex], Sequence[float]], complex]] = {
    "maxwell_garnett": maxwell_garnett,
    "bruggeman": bruggeman,
    "volume_average": volume_average,
}
