"""Scatterloom: polarimetric scattering campaigns of nonspherical particles."""

from importlib.metadata import version

__version__ = version("scatterloom")
