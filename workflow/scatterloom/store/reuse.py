"""Whether the case library is used; apart from it, as the engine on every node asks this."""

from __future__ import annotations

import os

from scatterloom.errors import BadInput

SWITCH = "SCATTERLOOM_CASE_REUSE"


def reuse_wanted(configured: bool) -> bool:
    """Whether the library is used: the environment goes before the configuration.

    Raises
    ------
    BadInput
        If the environment variable is neither "on" nor "off".
    """
    given = os.environ.get(SWITCH)
    if not given:
        return configured
    if given not in ("on", "off"):
        raise BadInput(f"environment variable {SWITCH}: found {given!r}\n  hint: set on or off")
    return given == "on"
