"""Scatterloom: polarimetric scattering campaigns of nonspherical particles."""

from importlib import import_module
from importlib.metadata import version
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from scatterloom.bulk.bulkfile import open_bulk
    from scatterloom.bulk.lookup import Table
    from scatterloom.errors import BadInput, IntegrityError
    from scatterloom.store.table import open_table, verify

__version__ = version("scatterloom")
__all__ = [
    "BadInput",
    "IntegrityError",
    "Table",
    "__version__",
    "open_bulk",
    "open_table",
    "verify",
]

# Loaded on first use: importing the package must stay quick for the command line.
_LAZY = {
    "BadInput": "scatterloom.errors",
    "IntegrityError": "scatterloom.errors",
    "open_bulk": "scatterloom.bulk.bulkfile",
    "Table": "scatterloom.bulk.lookup",
    "open_table": "scatterloom.store.table",
    "verify": "scatterloom.store.table",
}


def __getattr__(name: str) -> Any:
    if name in _LAZY:
        return getattr(import_module(_LAZY[name]), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
