"""Irregular bodies with a seed: their statistics against what was asked and known results."""

import math

import numpy as np
import pytest
from scipy.special import eval_legendre

from scatterloom.solids import random_sphere
from scatterloom.solids.facets import faceted_mesh
from scatterloom.solids.fragments import random_hull, rough_facets, voronoi_cell
from scatterloom.solids.globe import directions
from scatterloom.solids.registry import build
from solid_kit import is_closed

SHARES = {
    "angle": random_sphere.correlation_angle(35.0),
    "power": random_sphere.power_law(3.0, 10),
}


def unit_vectors(count, seed=0):
    raw = np.random.default_rng(seed).normal(size=(count, 3))
    return raw / np.linalg.norm(raw, axis=1, keepdims=True)


def test_harmonics_of_one_degree_have_squares_that_add_to_one():
    """Addition theorem (Abramowitz & Stegun 1964, 8.7 with equal directions)."""
    unit = unit_vectors(7)
    for degree in (0, 1, 5, 24):
        total = 0.0
        for place in range(2 * degree + 1):
            coefficients = np.zeros((25, 49))
            coefficients[degree, place] = 1.0
            total = total + random_sphere.logarithm(unit, coefficients) ** 2
        np.testing.assert_allclose(total, 1.0, rtol=1e-12)


def test_correlation_function_from_its_shares():
    """Legendre sum of the shares against the function they were made for."""
    angle = np.radians(np.linspace(0, 180, 19))
    length = 2.0 * math.sin(math.radians(35.0) / 2)
    expected = np.exp(-2.0 * np.sin(angle / 2) ** 2 / length**2)
    degree = np.arange(len(SHARES["angle"]))
    found = eval_legendre(degree, np.cos(angle)[:, None]) @ SHARES["angle"]
    np.testing.assert_allclose(found, expected, atol=1e-6)
    with pytest.raises(ValueError, match="needs more than 24 degrees"):
        random_sphere.correlation_angle(5.0)


@pytest.mark.parametrize("name", SHARES)
def test_sample_statistics_of_gaussian_spheres(name):
    """Mean, deviation and correlation over 800 members, within five standard errors."""
    sigma, share, members = 0.3, SHARES[name], 800
    angle = np.radians([0.0, 20.0, 60.0, 120.0])
    unit = np.stack([np.sin(angle), 0 * angle, np.cos(angle)], axis=1)
    logs = np.array([
        random_sphere.logarithm(unit, random_sphere.random_coefficients(sigma, share, seed))
        for seed in range(members)
    ])  # fmt: skip
    variance = math.log1p(sigma**2)
    covariance = variance * (eval_legendre(np.arange(len(share)), np.cos(angle)[:, None]) @ share)
    error = 5.0 * np.sqrt((variance**2 + covariance**2) / members)
    assert np.all(np.abs((logs[:, :1] * logs).mean(axis=0) - covariance) < error)
    assert np.all(np.abs(logs.mean(axis=0)) < 5.0 * math.sqrt(variance / members))
    radius = np.exp(logs[:, 0]) / math.sqrt(1.0 + sigma**2)
    assert abs(radius.mean() - 1.0) < 5.0 * sigma / math.sqrt(members)
    assert radius.std() == pytest.approx(sigma, rel=0.1)


def test_gaussian_sphere_has_those_radii():
    share = SHARES["power"]
    mesh = random_sphere.gaussian_sphere(0.2, share, 4)
    assert is_closed(mesh)
    radius = np.linalg.norm(mesh.corners, axis=1)
    unit = mesh.corners / radius[:, None]
    logs = random_sphere.logarithm(unit, random_sphere.random_coefficients(0.2, share, 4))
    # corners lie above the surface by the bulge of a triangle at most
    np.testing.assert_allclose(radius, np.exp(logs) / math.sqrt(1.04), rtol=2e-3)
    # volume: a third of the mean cubed radius, by quadrature over much finer triangles
    fine, triangles = directions(96)
    r = np.exp(random_sphere.logarithm(fine, random_sphere.random_coefficients(0.2, share, 4)))
    r = r / math.sqrt(1.04)
    a, b, c = (fine[triangles[:, i]] for i in range(3))
    lower = 1 + np.sum(a * b, 1) + np.sum(b * c, 1) + np.sum(c * a, 1)
    angle = 2 * np.arctan2(np.sum(a * np.cross(b, c), 1), lower)  # solid angle of a triangle
    assert angle.sum() == pytest.approx(4 * math.pi, rel=1e-12)
    volume = np.sum(angle * (r**3)[triangles].mean(axis=1)) / 3.0
    assert mesh.volume == pytest.approx(volume, rel=2e-4)


def test_voronoi_cells_are_typical():
    """Poisson-Voronoi cells: mean volume 1, on average 48 pi^2/35 + 2 = 15.54 faces.

    Meijering (1953), Philips Res. Rep. 8, 270; variance of the volume 0.179 (Gilbert 1962,
    Ann. Math. Stat. 33, 958); both from memory.
    """
    faces, volumes = [], []
    for seed in range(150):
        corners, polygons = voronoi_cell(seed)
        faces.append(len(polygons))
        volumes.append(faceted_mesh(corners, polygons).volume)
    mean = 48 * math.pi**2 / 35 + 2
    assert abs(np.mean(faces) - mean) < 4.0 * np.std(faces) / math.sqrt(150)
    assert abs(np.mean(volumes) - 1.0) < 4.0 * math.sqrt(0.179 / 150)
    assert np.var(volumes) == pytest.approx(0.179, rel=0.5)


def test_hulls_of_points():
    corners, faces = random_hull(40, 3)
    mesh = faceted_mesh(corners, faces)
    assert is_closed(mesh)
    # a simplicial polyhedron (Euler): faces = 2 corners - 4
    assert len(faces) == 2 * len(corners) - 4 and all(len(face) == 3 for face in faces)
    assert np.linalg.norm(corners, axis=1).max() <= 1.0


@pytest.mark.parametrize("rms", [0.0, 0.03, 0.1])
def test_rough_spheres_have_the_roughness_asked(rms):
    mesh = rough_facets(4, rms, 2)
    assert is_closed(mesh) and mesh.piece.max() + 1 == 320
    radius = np.linalg.norm(mesh.corners, axis=1)
    assert radius.mean() == pytest.approx(1.0, rel=1e-12)
    assert radius.std() == pytest.approx(rms, rel=1e-9, abs=1e-12)
    with pytest.raises(ValueError, match="moves a corner to"):
        rough_facets(12, 0.35, 2)


@pytest.mark.parametrize("spec", [
    {"kind": "point_hull", "points": 12},
    {"kind": "voronoi_fragment", "edge_radius_fraction": 0.2},
    {"kind": "rough_sphere", "edge_parts": 2, "roughness": 0.1},
    {"kind": "ballistic_cluster", "monomers": 5},
], ids=lambda s: s["kind"])  # fmt: skip
def test_seeds_make_members_again(spec):
    one, other = build({**spec, "seed": 1}), build({**spec, "seed": 2})
    again = build({**spec, "seed": 1, "core_radius_fraction": 0.5})
    assert np.array_equal(one.interfaces[0].mesh.corners, again.interfaces[0].mesh.corners)
    assert one.volume != other.volume or not np.array_equal(
        one.interfaces[0].mesh.corners, other.interfaces[0].mesh.corners
    )


def test_random_numbers_are_those_of_the_algorithm():
    """First values of the stream, so that a change of the library does not change bodies."""
    from scatterloom.solids.seeds import generator

    rng = generator(2026)
    first = [0.4990091736717394, -0.16053207863958222, 0.012397145519284614]
    assert rng.integers(0, 2**32, size=3).tolist() == [3658676650, 768519172, 113462463]
    corners, _ = random_hull(4, 1)
    np.testing.assert_allclose(corners[0], first, rtol=1e-12)
