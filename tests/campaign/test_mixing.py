"""Mixing rules against closed forms, limits and bounds."""

import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from campaign.bad_configs import edited
from scatterloom.campaign import load
from scatterloom.campaign.mixing import RULES, bruggeman, maxwell_garnett, volume_average
from scatterloom.errors import BadInput

REAL = st.floats(1.0, 9.0)
LOSS = st.floats(0.0, 4.0)
SHARE = st.floats(0.01, 0.99)


def test_bruggeman_of_two_parts_is_the_root_of_its_quadratic():
    # Solved by hand for two parts: 2 e^2 - b e - e1 e2 = 0, b = (3 f1 - 1) e1 + (3 f2 - 1) e2.
    e1, e2, f2 = 2.25 + 0.01j, 6.0 + 1.5j, 0.4
    b = (3 * (1 - f2) - 1) * e1 + (3 * f2 - 1) * e2
    expected = (b + np.sqrt(b**2 + 8 * e1 * e2)) / 4
    assert bruggeman(e1, [e2], [f2]) == pytest.approx(expected, rel=1e-12)


def test_maxwell_garnett_of_bubbles():
    # Bohren & Huffman 1983, eq. 8.50: e = h (1 + 3 f g / (1 - f g)), g = (i - h)/(i + 2 h).
    h, i, f = 1.77 + 0j, 1.0 + 0j, 0.25
    g = (i - h) / (i + 2 * h)
    expected = h * (1 + 3 * f * g / (1 - f * g))
    assert maxwell_garnett(h, [i], [f]) == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("rule", RULES)
def test_little_of_something_and_nothing_but_something(rule):
    host, part = 2.0 + 0.1j, 5.0 + 0.5j
    assert RULES[rule](host, [part], [1e-12]) == pytest.approx(host, rel=1e-11)
    assert RULES[rule](host, [part], [1 - 1e-12]) == pytest.approx(part, rel=1e-10)


@pytest.mark.parametrize("rule", RULES)
@given(host=REAL, part=REAL, share=SHARE)
def test_lossless_mixtures_lie_within_the_bounds(rule, host, part, share):
    # Wiener 1912 for any structure; Hashin & Shtrikman 1962 for isotropic ones, whose two
    # bounds are Maxwell Garnett with either part as the host (both from memory).
    value = RULES[rule](host + 0j, [part + 0j], [share])
    low = 1.0 / ((1 - share) / host + share / part)
    high = volume_average(host + 0j, [part + 0j], [share]).real
    assert value.imag == 0.0
    assert low * (1 - 1e-9) <= value.real <= high * (1 + 1e-9)
    if rule == "bruggeman":
        ends = sorted(
            e.real
            for e in (
                maxwell_garnett(host + 0j, [part + 0j], [share]),
                maxwell_garnett(part + 0j, [host + 0j], [1 - share]),
            )
        )
        assert ends[0] * (1 - 1e-9) <= value.real <= ends[1] * (1 + 1e-9)


@given(
    e=st.lists(st.tuples(REAL, LOSS), min_size=2, max_size=4),
    shares=st.lists(SHARE, min_size=4, max_size=4),
)
def test_bruggeman_solves_its_equation_and_does_not_amplify(e, shares):
    eps = [complex(*pair) for pair in e]
    f = np.array(shares[: len(eps)])
    f /= f.sum()
    value = bruggeman(eps[0], eps[1:], list(f[1:]))
    balance = sum(w * (p - value) / (p + 2 * value) for w, p in zip(f, eps, strict=True))
    # Roots of a polynomial of degree 4 that may lie close together: half of the digits.
    assert abs(balance) < 1e-7
    assert value.imag >= 0.0


def test_equal_parts_mix_to_themselves():
    e = 2.3 + 0.2j
    for rule in RULES.values():
        assert rule(e, [e, e], [0.2, 0.3]) == pytest.approx(e, rel=1e-7)


MIXED = (
    "{n: 1.5, k: 0.0}",
    "{mix: {rule: %s, host: brine, inclusions: {soot: 0.1}}}\n"
    "  brine: {n: 1.36, k: 0.0, density_g_cm3: 1.1}\n"
    "  soot: {n: 1.95, k: 0.79, density_g_cm3: 1.8}",
)


def campaign(tmp_path, *pieces):
    path = tmp_path / "campaign.yaml"
    path.write_text(edited(*pieces), encoding="utf-8")
    return load(path)


@pytest.mark.parametrize("rule", RULES)
def test_a_mixture_in_a_campaign(tmp_path, rule):
    mixed = campaign(tmp_path, MIXED[0], MIXED[1] % rule)
    expected = np.sqrt(RULES[rule]((1.36 + 0j) ** 2, [(1.95 + 0.79j) ** 2], [0.1]))
    assert mixed.indices["salt"][0] == pytest.approx(expected, rel=1e-11)
    assert mixed.model.densities()["ball"] == pytest.approx(0.9 * 1.1 + 0.1 * 1.8)
    again = tmp_path / "merged.yaml"
    again.write_text(mixed.merged_yaml(), encoding="utf-8")
    assert load(again).indices == mixed.indices


def test_crowded_inclusions_are_warned_of(tmp_path):
    text = MIXED[1] % "maxwell_garnett"
    assert not campaign(tmp_path, MIXED[0], text).warnings
    (warning,) = campaign(tmp_path, MIXED[0], text.replace("0.1}", "0.4}")).warnings
    assert "take 40 % of the volume" in warning.message


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("{soot: 0.1}", "{soot: 1.0}", "out of range"),
        ("{soot: 0.1}", "{soot: 0.6, silt: 0.5}", "the inclusions take 1.1 of the volume"),
        ("{soot: 0.1}", "{brine: 0.1}", "'brine' is host and inclusion"),
        ("{soot: 0.1}", "{sot: 0.1}", "material 'sot' is not defined"),
        ("{soot: 0.1}", "{salt: 0.1}", "materials.salt is made of itself"),
        ("{n: 1.95, k: 0.79,", "{n: 0.2, k: 3.0,", "mixed from 'soot', which is metallic"),
        ("bruggeman", "brugman", "is not allowed"),
    ],
)
def test_mixtures_that_cannot_be(tmp_path, old, new, expected):
    text = MIXED[1] % "bruggeman"
    assert old in text
    with pytest.raises(BadInput) as caught:
        campaign(tmp_path, MIXED[0], text.replace(old, new))
    found = [p.message for p in caught.value.problems]
    assert any(re.search(re.escape(expected), message) for message in found), found
    assert len(found) == 1
