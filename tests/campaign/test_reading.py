"""What a good campaign file means: grids, optical constants, populations, defaults."""

from decimal import Decimal

import numpy as np
import pytest
from scipy.integrate import quad

from campaign.bad_configs import GOOD, edited
from scatterloom.campaign import load
from scatterloom.campaign.expand import expand
from scatterloom.campaign.grids import AngleRule, SizeRule
from scatterloom.campaign.size_sections import Gamma, Lognormal
from scatterloom.campaign.spectra import Spectrum


@pytest.fixture
def campaign_of(tmp_path):
    def make(text: str, name: str = "campaign.yaml"):
        path = tmp_path / name
        path.write_text(text)
        return load(path)

    return make


def rule(**keys):
    return SizeRule.model_validate(keys)


def test_size_rules():
    assert rule(**{"from": 0.1, "to": 1.0}, ratio=1.2).values()[:3] == [
        Decimal("0.1"),
        Decimal("0.12"),
        Decimal("0.144"),
    ]
    doubling = rule(**{"from": 0.3, "to": 1.2}, per_doubling=3).values()
    # Irrational inside, and exact again after a factor of two (to the 40 digits carried).
    assert doubling[3] == Decimal("0.6") and doubling[6] == Decimal("1.2")
    assert len(doubling) == 7
    count = rule(**{"from": 0.1, "to": 0.9}, count=3).values()
    assert [count[0], count[-1]] == [Decimal("0.1"), Decimal("0.9")]
    assert float(count[1]) == pytest.approx(0.3, rel=1e-15)


def test_last_size_is_kept_in_spite_of_rounding():
    # ln(1.1^9) / ln 1.1 is a little below nine in floating point for some bases.
    for start in (0.1, 0.3, 0.7, 1.3):
        end = float(Decimal(repr(start)) * Decimal("1.1") ** 9)
        assert len(rule(**{"from": start, "to": end}, ratio=1.1).values()) == 10


def test_angles_are_the_decimals_written():
    angles = AngleRule.model_validate({"from": 0, "to": 180, "step": 0.1}).values()
    assert len(angles) == 1801
    assert float(angles[3]) == 0.3  # 3 * 0.1 in floating point is 0.30000000000000004
    assert float(angles[-1]) == 180.0


def test_numbers_are_read_as_yaml_1_2_says(campaign_of):
    text = edited("k: 0.003", "k: 1e-6", "title: Silt and salt", "title: no")
    model = campaign_of(text).model
    assert model.materials["silt"].k == 1e-6
    assert model.title == "no"


def test_defaults(campaign_of):
    text = edited(
        "medium: {index: 1.0}\n",
        "",
        "accuracy: {f11_relative: 0.02, ratio_absolute: 0.01, efficiency_relative: 0.005}\n",
        "accuracy: {ratio_absolute: 0.02}\n",
        "solver: {levels: [12, 16, 24], job_seconds: 20}\n",
        "",
    )
    model = campaign_of(text).model
    assert model.medium.index == 1.0
    assert model.accuracy.ratio_absolute == 0.02
    assert model.accuracy.f11_relative == 0.02
    assert model.solver.levels is None
    assert model.orientation == "random"


def test_aliases_are_understood(campaign_of):
    text = edited("{n: 1.53, k: 0.003}", "&m {n: 1.53, k: 0.003}", "{n: 1.5, k: 0.0}", "*m")
    assert campaign_of(text).indices["salt"] == (1.53 + 0.003j,) * 2


def test_interpolation_is_linear_in_the_logarithm_of_wavelength():
    spectrum = Spectrum((0.25, 1.0, 2.0), (1.4, 1.5, 1.7), (0.0, 0.01, 0.05))
    # Half way between 0.25 and 1 um in the logarithm is 0.5 um.
    assert spectrum.at(0.5) == pytest.approx((1.45, 0.005), rel=1e-14)
    assert spectrum.at(1.0) == (1.5, 0.01)
    assert spectrum.at(2.0) == (1.7, 0.05)
    with pytest.raises(ValueError, match="outside"):
        spectrum.at(2.1)


def test_merged_yaml_gives_the_same_cases_anywhere(campaign_of, tmp_path):
    (tmp_path / "salt.csv").write_text("wavelength_um,n,k\n0.4,1.55,1e-9\n2,1.5,0.001\n")
    text = edited("{n: 1.5, k: 0.0}", "{table: salt.csv}", "{kind: sphere}", ELLIPSOID)
    first = campaign_of(text)
    (tmp_path / "salt.csv").unlink()
    second = campaign_of(first.merged_yaml(), "merged.yaml")
    grids = expand(first), expand(second)
    assert [case.digest for case in grids[0].cases] == [case.digest for case in grids[1].cases]
    note = "# The spectrum of 'salt' was read from 'salt.csv'.\n"
    assert second.merged_yaml() == first.merged_yaml().replace(note, "")
    assert note in first.merged_yaml()
    assert "solver:" in first.merged_yaml() and "orientation: random" in first.merged_yaml()


ELLIPSOID = "{kind: ellipsoid, axes: [3, 2, 1]}"


def test_table_is_found_beside_the_file_not_in_the_current_folder(campaign_of, tmp_path):
    (tmp_path / "salt.csv").write_text("wavelength_um,n,k\n0.5,1.55,0\n1,1.5,0.001\n")
    campaign = campaign_of(edited("{n: 1.5, k: 0.0}", "{table: salt.csv}"))
    assert campaign.indices["salt"] == (1.55 + 0j, 1.5 + 0.001j)


@pytest.mark.parametrize(
    "size",
    [
        Lognormal(kind="lognormal", radius_um=0.2, geometric_sd=1.6),
        Lognormal(kind="lognormal", effective_radius_um=0.4, effective_variance=0.2),
        Gamma(kind="gamma", effective_radius_um=0.4, effective_variance=0.2),
    ],
)
def test_coverage_against_quadrature(size):
    """Closed forms of the area between two radii against scipy's adaptive quadrature."""

    def area(log_radius):
        radius = np.exp(log_radius)
        if isinstance(size, Gamma):
            a, b = size.effective_radius_um, size.effective_variance
            number = radius ** ((1 - 3 * b) / b) * np.exp(-radius / (a * b))
        else:
            median, s = size.median_and_width()
            number = np.exp(-0.5 * (log_radius - np.log(median)) ** 2 / s**2) / radius
        return radius**3 * number  # r^2 n(r) dr = r^3 n(r) d ln r

    low, high = np.log(0.15), np.log(0.7)
    part = quad(area, low, high, epsabs=0)[0] / quad(area, -12, 6, epsabs=0, limit=200)[0]
    assert size.area_fraction(0.15, 0.7) == pytest.approx(part, rel=1e-7)


def test_effective_radius_and_variance_of_a_lognormal():
    """r_eff and v_eff are ratios of moments (Hansen & Travis 1974)."""
    size = Lognormal(kind="lognormal", effective_radius_um=0.4, effective_variance=0.2)
    median, s = size.median_and_width()

    def moment(power):
        return median**power * np.exp(0.5 * power**2 * s**2)

    effective = moment(3) / moment(2)
    variance = (moment(4) / moment(2) - 2 * effective * moment(3) / moment(2)) / effective**2 + 1
    assert (effective, variance) == pytest.approx((0.4, 0.2), rel=1e-12)


def test_good_file_has_no_warnings(campaign_of):
    assert campaign_of(GOOD).warnings == ()
