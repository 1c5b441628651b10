"""Kinds of values that several commands take."""

from __future__ import annotations

import argparse


def positive(text: str) -> int:
    """Read a whole number from one upwards."""
    value = int(text)
    if value < 1:
        raise argparse.ArgumentTypeError(f"{value} is below 1")
    return value
