"""Geometry of particles as closed surfaces, before any lattice."""
