"""Particles that may differ from their mirror image."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import xarray

_FROM_FILES = ("mesh", "labels")


def may_be_handed(particle: Mapping[str, Any]) -> bool:
    """Whether nothing in its description gives a particle a mirror plane.

    A single irregular body, oriented at random, has a matrix with sixteen elements; six
    suffice for a body with a mirror plane, or for equal numbers of both mirror images (van de
    Hulst 1957, section 5.22).

    Parameters
    ----------
    particle : mapping
        As in the campaign file.
    """
    shape = particle.get("shape") or {}
    if shape.get("kind") in _FROM_FILES or "seed" in shape:
        return True
    # The centres of two spheres and that of a simple body lie in one plane.
    groups = particle.get("inclusions") or []
    return sum(group.get("count") or 1 for group in groups) > 2 or (
        bool(groups) and shape.get("kind") != "sphere"
    )


def handed_particles(table: xarray.Dataset) -> set[str]:
    """Names of the particles of a table that may differ from their mirror image."""
    from ruamel.yaml import YAML

    config = YAML(typ="safe", pure=True).load(str(table.attrs.get("config", ""))) or {}
    return {str(p["name"]) for p in config.get("particles", ()) if may_be_handed(p)}
