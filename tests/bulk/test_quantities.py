"""Whole populations of spheres against direct integration of the Mie series, within the bars.

Two materials (water and a silt, index from common practice), gamma and lognormal
distributions, two wavelengths; also power laws, sums and shares by mass, in closed relations.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from oracles.mie import sphere
from oracles.tables import mie_table
from scatterloom.bulk.build import build
from scatterloom.bulk.population import Population, populations_of
from scatterloom.bulk.quantities import spectral
from scatterloom.bulk.schema import VALUE_NAMES
from scatterloom.campaign import load
from scatterloom.campaign.composed import Sum, Tabulated, by
from scatterloom.campaign.distribution import Gamma, Lognormal, PowerLaw

WAVELENGTH_UM = (0.532, 1.064)
INDICES = {"water": 1.33 + 0.0j, "silt": 1.53 + 0.003j}
DENSITY = {"water": 1.0, "silt": 2.65}
ANGLES = np.array([0.0, 20.0, 90.0, 150.0, 180.0])
RADIUS = np.geomspace(0.02, 1.0, 100)
SIZES = {
    "gamma": Gamma(0.25, 0.08),
    "lognormal": Lognormal(0.15, math.log(1.35)),
    "power": PowerLaw(4.0, 0.07, 0.7),
    "bimodal": Sum.of([Lognormal(0.1, 0.25), Gamma(0.35, 0.04)], [0.4, 0.6], 3),
    "rows": by(
        Tabulated(np.array([0.05, 0.1, 0.3, 0.8]), np.array([0.0, 1.0, 2.0, 0.0])), "volume"
    ),
}


def direct(distribution, index: complex, wavelength_um: float) -> dict[str, float]:
    """Gauss-Legendre integration of the Mie series between all breaks, no table, no bars."""
    low, high = distribution.span_um
    edges = {max(low, 0.02), min(high * 1.2, 1.0)}
    edges |= {b for b in distribution.breaks_um if 0.02 < b < 1.0}
    u = np.log(sorted(edges))
    node, weight = np.polynomial.legendre.leggauss(max(70, 160 // (u.size - 1)))
    half = 0.5 * np.diff(u)[:, None]
    radius = np.exp(u[:-1, None] + half * (1 + node)).ravel()
    number = (half * weight).ravel() * distribution.density(radius)
    balls = [sphere(index, 2 * math.pi * r / wavelength_um) for r in radius]
    area = number * math.pi * radius**2
    ext = float(area @ [b.extinction_efficiency for b in balls])
    each = area * [b.scattering_efficiency for b in balls]
    sca = float(each.sum())
    matrix = np.tensordot(each, [b.scattering_matrix(ANGLES) for b in balls], axes=1) / sca
    volume = 4 * math.pi / 3 * float(number @ radius**3)
    back = sca * matrix[-1, 0, 0] / (4 * math.pi)
    density = DENSITY["water" if index.imag == 0 else "silt"]
    return {
        "extinction_cross_section": ext,
        "scattering_cross_section": sca,
        "single_scattering_albedo": sca / ext,
        "asymmetry_parameter": float(each @ [b.asymmetry_parameter for b in balls]) / sca,
        "extinction_efficiency": ext / float(area.sum()),
        "extinction_per_volume": ext / volume,
        "extinction_per_mass": ext / volume / density,  # 1 um-1 at 1 g/cm3 is 1 m2/g
        "backscatter_cross_section": back,
        "backscatter_per_mass": back / volume / density,
        "lidar_ratio": ext / back,
        "scattering_matrix": matrix,
        "degree_of_linear_polarization": -matrix[:, 0, 1] / matrix[:, 0, 0],
    }


@pytest.fixture(scope="module")
def table():
    # The table states tiny errors of its own: what is tested is the average's own bar.
    return mie_table(RADIUS, WAVELENGTH_UM, ANGLES, INDICES, relative_error=1e-6)


@pytest.fixture(scope="module")
def populations():
    return [
        Population(f"{material}_{name}", {material: 1.0}, size, densities=DENSITY)
        for material in INDICES
        for name, size in SIZES.items()
    ]


@pytest.fixture(scope="module")
def columns(table, populations):
    return build(table, populations)


@pytest.mark.parametrize("material", INDICES)
@pytest.mark.parametrize("size", SIZES)
def test_within_the_bars_of_direct_integration(material, size, columns, populations) -> None:
    i = [p.name for p in populations].index(f"{material}_{size}")
    exact = [direct(SIZES[size], INDICES[material], w) for w in WAVELENGTH_UM]
    for w in range(2):
        for name, value in exact[w].items():
            found, bar = columns[name][i, w], columns[f"{name}_error"][i, w]
            # 1e-12: rounding where a bar is zero (albedo of water, elements that vanish).
            assert np.all(np.abs(found - value) <= bar + 1e-12), (name, w)
        # Bars must say something: extinction of these grids is known to a percent.
        assert (
            columns["extinction_cross_section_error"][i, w]
            < 0.012 * exact[w]["extinction_cross_section"]
        ), size
    ratio = exact[1]["backscatter_cross_section"] / exact[0]["backscatter_cross_section"]
    exponent = -math.log(
        exact[1]["extinction_cross_section"] / exact[0]["extinction_cross_section"]
    ) / math.log(2.0)
    for name, value in (("colour_ratio", ratio), ("extinction_angstrom_exponent", exponent)):
        assert abs(columns[name][i, 0] - value) <= columns[f"{name}_error"][i, 0], name


def test_small_particles_have_the_exponents_of_rayleigh() -> None:
    """Scattering as 1/wavelength^4: exponent 4 and a colour ratio of 1/16 at a factor of 2."""
    small = mie_table(
        np.geomspace(1e-3, 8e-3, 24), (0.5, 1.0), np.array([0.0, 90.0, 180.0]), {"a": 1.4 + 0j}
    )
    out = build(small, [Population("a", {"a": 1.0}, Lognormal(2.5e-3, 0.15))])
    assert out["extinction_angstrom_exponent"][0, 0] == pytest.approx(4.0, abs=0.01)
    assert out["backscatter_angstrom_exponent"][0, 0] == pytest.approx(4.0, abs=0.01)
    assert out["colour_ratio"][0, 0] == pytest.approx(1 / 16, rel=0.01)
    # Rayleigh phase function 3/4 (1 + cos^2) at 180 degrees: lidar ratio 8 pi/3.
    assert out["lidar_ratio"][0, 0] == pytest.approx(8 * math.pi / 3, rel=2e-3)


def test_relative_bars_of_two_wavelengths_add(columns) -> None:
    value, bar = spectral(columns, 0, 0, 1)["extinction_angstrom_exponent"]
    c, e = columns["extinction_cross_section"][0], columns["extinction_cross_section_error"][0]
    assert value == pytest.approx(-math.log(c[1] / c[0]) / math.log(2.0), rel=1e-12)
    assert bar == pytest.approx((e[0] / c[0] + e[1] / c[1]) / math.log(2.0), rel=1e-12)
    # The other way round it is the same exponent.
    assert spectral(columns, 0, 1, 0)["extinction_angstrom_exponent"][0] == pytest.approx(value)


def test_two_particles_with_distributions_of_their_own(table) -> None:
    fine, coarse = Lognormal(0.1, 0.25), Gamma(0.35, 0.04)
    both = Population("b", {"water": 3.0, "silt": 1.0}, fine, {"silt": coarse}, DENSITY)
    one = Population("w", {"water": 1.0}, fine, densities=DENSITY)
    two = Population("s", {"silt": 1.0}, coarse, densities=DENSITY)
    out = build(table, [both, one, two])
    ext = out["extinction_cross_section"]
    np.testing.assert_allclose(ext[0], 0.75 * ext[1] + 0.25 * ext[2], rtol=1e-12)
    mass = [3.0 * fine.moment(3), 2.65 * coarse.moment(3)]
    per_mass = out["extinction_per_mass"]
    share = mass[0] / sum(mass)
    np.testing.assert_allclose(
        per_mass[0], share * per_mass[1] + (1 - share) * per_mass[2], rtol=1e-12
    )
    assert out["mass_density"][0] == pytest.approx(
        sum(mass) / (3.0 * fine.moment(3) + coarse.moment(3)), rel=1e-12
    )


CAMPAIGN = """campaign: shares
title: Shares by mass
wavelengths_um: [0.532]
materials:
  water: {n: 1.33, k: 0, density_g_cm3: 1.0}
  silt: {n: 1.53, k: 0.003}
particles:
  - {name: drop, material: water, shape: {kind: sphere}}
  - {name: grain, material: silt, shape: {kind: sphere}, density_g_cm3: 2.5}
sizes: {radius_um: {from: 0.01, to: 2.0, ratio: 1.2}}
angles_deg: {from: 0, to: 180, step: 1}
populations:
  - name: mix
    particles: {drop: 1, grain: 3}
    shares_by: mass
    size: {kind: lognormal, radius_um: 0.2, geometric_sd: 1.3, by: volume}
    sizes:
      grain: {kind: tabulated, table: rows.csv, per: radius, by: area}
"""


def test_shares_by_mass_and_a_table_of_sizes(tmp_path) -> None:
    (tmp_path / "c.yaml").write_text(CAMPAIGN)
    (tmp_path / "rows.csv").write_text("radius_um,density # made up\n0.1, 0\n0.3, 2\n0.9, 0\n")
    campaign = load(tmp_path / "c.yaml")
    (mix,) = populations_of(campaign.model)
    drop, grain = mix.distribution_of("drop"), mix.distribution_of("grain")
    mass = {
        "drop": mix.numbers["drop"] * drop.moment(3),
        "grain": 2.5 * mix.numbers["grain"] * grain.moment(3),
    }
    assert mass["grain"] == pytest.approx(3.0 * mass["drop"], rel=1e-12)
    assert drop.moment(3) / drop.moment(0) == pytest.approx(
        (0.2 * math.exp(-1.5 * math.log(1.3) ** 2)) ** 3, rel=1e-12
    )
    # By area and per unit of radius: n(r) r^2 is the triangle times 1/r per ln r.
    r = np.array([0.2, 0.4])
    shape = np.interp(np.log(r), np.log([0.1, 0.3, 0.9]), [0.0, 0.6, 0.0])
    found = grain.density(r) * r**2
    assert found[1] / found[0] == pytest.approx(shape[1] / shape[0], rel=1e-12)
    # The merged file holds the rows: it runs anywhere and means the same.
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "c.yaml").write_text(campaign.merged_yaml())
    (again,) = populations_of(load(tmp_path / "elsewhere" / "c.yaml").model)
    assert again.numbers == mix.numbers


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("radius,density\n1,2\n2,3\n", "rows.csv:1:1: wrong header"),
        ("radius_um,density\n1,2\n2,x\n", "rows.csv:3:1: density is not a number"),
        ("radius_um,density\n1,2\n2,-1\n", "rows.csv:3:1: density is out of range"),
        ("radius_um,density\n1,2\n1,3\n", "rows.csv:3:1: radius_um 1 does not exceed"),
        ("radius_um,density\n1,2,3\n2,3\n", "rows.csv:2:1: wrong number of cells"),
        ("radius_um,density\n1,0\n2,0\n", "rows.csv: a distribution needs two rows"),
        ("# nothing\n", "rows.csv: the file holds no table"),
    ],
)
def test_bad_tables_of_sizes_are_refused(text, message, tmp_path) -> None:
    from scatterloom.errors import BadInput

    (tmp_path / "c.yaml").write_text(CAMPAIGN)
    (tmp_path / "rows.csv").write_text(text)
    with pytest.raises(BadInput) as caught:
        load(tmp_path / "c.yaml")
    assert message in str(caught.value)


def test_every_value_is_tested_or_of_spheres_trivial() -> None:
    known = set(direct(Gamma(0.25, 0.08), 1.33 + 0j, 0.532))
    known |= {n for n in VALUE_NAMES if n.startswith(("absorption", "scattering_"))}
    rest = set(VALUE_NAMES) - known
    assert rest == {
        "backscatter_per_volume",
        "backscatter_angstrom_exponent",
        "colour_ratio",
        "depolarization_spectral_ratio",
        "extinction_angstrom_exponent",
        "linear_depolarization_ratio",
        "circular_depolarization_ratio",
    }


def test_density_of_a_coated_particle_is_that_of_its_volumes(tmp_path) -> None:
    text = CAMPAIGN.split("populations:")[0].replace(
        "{name: drop, material: water, shape: {kind: sphere}}",
        "{name: drop, material: silt, shape: {kind: sphere},"
        " coating: {material: water, core_volume_fraction: 0.25}}",
    )
    (tmp_path / "c.yaml").write_text(text)
    assert load(tmp_path / "c.yaml").model.densities() == {"drop": None, "grain": 2.5}
    text = text.replace("k: 0.003}", "k: 0.003, density_g_cm3: 2.6}")
    (tmp_path / "c.yaml").write_text(text)
    assert load(tmp_path / "c.yaml").model.densities()["drop"] == pytest.approx(
        0.25 * 2.6 + 0.75 * 1.0, rel=1e-12
    )
