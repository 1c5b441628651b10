"""Optical constants: the database against published values, and how a campaign names them."""

import re

import pytest

from campaign.bad_configs import edited
from scatterloom.campaign import load
from scatterloom.campaign.database import entry
from scatterloom.campaign.expand import expand
from scatterloom.errors import BadInput

# (entry, wavelength, published n, k, tolerance of n: the digits published)
PUBLISHED = [
    # Warren & Brandt 2008, J. Geophys. Res. 113, D14220, table of the authors (from memory).
    ("main/H2O/Warren-2008", 0.55, 1.3110, 2.289e-9, 1e-4),
    # Hale & Querry 1973, Appl. Opt. 12, 555, table I (from memory).
    ("main/H2O/Hale", 0.55, 1.333, 1.96e-9, 1e-3),
    ("main/H2O/Hale", 10.0, 1.218, 0.0508, 1e-3),
    # Quartz and calcite at the sodium lines, both rays: handbooks of mineralogy (from memory).
    ("main/SiO2/Ghosh-o", 0.5893, 1.5442, None, 3e-4),
    ("main/SiO2/Ghosh-e", 0.5893, 1.5533, None, 3e-4),
    ("main/CaCO3/Ghosh-o", 0.5893, 1.6584, None, 3e-4),
    ("main/CaCO3/Ghosh-e", 0.5893, 1.4864, None, 5e-4),
    # Corundum, ordinary ray: handbooks give 1.767 to 1.770 (from memory).
    ("main/Al2O3/Malitson-o", 0.5893, 1.768, None, 2e-3),
    # One entry of every other formula, with values of handbooks and data sheets (from memory).
    ("main/SiO2/Malitson", 0.587562, 1.45846, None, 2e-5),
    ("3d/glass/BK7", 0.587562, 1.5168, None, 2e-5),
    ("main/H2O/Bashkatov", 0.5893, 1.333, None, 1e-3),
    ("organic/benzene/Moutzouris", 0.5893, 1.498, None, 4e-3),
    ("main/BaB2O4/Eimerl-o", 0.532, 1.674, None, 2e-3),
    ("main/AgBr/Schröter", 0.5893, 2.253, None, 1e-2),
    ("main/N2/Peck-0C", 0.5893, 1.000298, None, 3e-6),
    ("main/Si/Edwards", 5.0, 3.422, None, 5e-3),
    ("organic/urea/Rosker-e", 0.5893, 1.602, None, 1e-2),
]


@pytest.mark.parametrize(
    ("name", "wavelength_um", "n", "k", "tolerance"),
    PUBLISHED,
    ids=[f"{row[0]} {row[1]}" for row in PUBLISHED],
)
def test_entries_have_published_values(name, wavelength_um, n, k, tolerance):
    found = entry(name)
    assert found.n(wavelength_um) == pytest.approx(n, abs=tolerance)
    if k is not None:
        # Three or four digits are published; n + ik has a positive k.
        assert found.k(wavelength_um) == pytest.approx(k, rel=2e-3)


@pytest.fixture
def written(tmp_path):
    def write(*pieces: str):
        path = tmp_path / "campaign.yaml"
        path.write_text(edited(*pieces), encoding="utf-8")
        return path

    return write


SALT = "{n: 1.5, k: 0.0}"
ICE = "{database: main/H2O/Warren-2008}"


def test_values_of_an_entry_are_those_of_the_same_numbers_written_out(written):
    from_database = load(written(SALT, ICE))
    assert from_database.indices["salt"][0] == 1.313 + 5.889e-10j  # a row of the table
    rows = [
        f"{{wavelength_um: {w}, n: {m.real!r}, k: {m.imag!r}}}"
        for w, m in zip((0.5, 1.0), from_database.indices["salt"], strict=True)
    ]
    spelled = load(written(SALT, f"{{spectrum: [{', '.join(rows)}]}}"))
    digests = [[case.digest for case in expand(c).cases] for c in (from_database, spelled)]
    assert digests[0] == digests[1]


def test_a_merged_campaign_needs_no_database(written, tmp_path):
    campaign = load(written(SALT, ICE))
    merged = campaign.merged_yaml()
    assert "database:" not in merged
    assert "Warren and R. E. Brandt" in merged  # whom to cite
    again = tmp_path / "merged.yaml"
    again.write_text(merged, encoding="utf-8")
    assert load(again).indices == campaign.indices


@pytest.mark.parametrize(
    ("material", "expected"),
    [
        ("{database: main/H2O}", r"database: it has the form shelf/book/page"),
        ("{database: main/H2O/Warren}", r"names no entry\n.*\n.*did you mean 'main/H2O/Warren"),
        ("{database: main/nothing/none}", r"names no entry\n.*\n.*refractiveindex.info"),
        ("{database: main/SiO2/Ghosh-o}", r"the entry main/SiO2/Ghosh-o has no k"),
        ("{k: 0.0, database: main/H2O/Hale}", r"the entry main/H2O/Hale has its own k"),
        ("{database: main/H2O/Wang}", r"the entry has no real part n"),
        ("{k: 0.0, database: main/H2O/Bashkatov}", r"does not cover 1 um.*or|does not cover"),
        ("{database: ../../etc/passwd}", r"it has the form shelf/book/page"),
    ],
)
def test_entries_that_cannot_be_used(written, material, expected):
    pieces = ("[0.5, 1.0]", "[0.5, 20]") if "Bashkatov" in material else ()
    with pytest.raises(BadInput) as caught:
        load(written(SALT, material, *pieces))
    shown = "\n".join(str(problem) for problem in caught.value.problems)
    assert re.search(expected, shown), shown
    assert len(caught.value.problems) == 1


def test_a_database_k_beside_an_entry_without_one(written):
    campaign = load(written(SALT, "{k: 1e-4, database: main/SiO2/Ghosh-o}"))
    assert [m.imag for m in campaign.indices["salt"]] == [1e-4, 1e-4]


WATER = "{n: 1.5, k: 0.0}\n  water: {database: main/H2O/Hale}"


def test_a_medium_with_dispersion(written):
    path = written(SALT, WATER, "medium: {index: 1.0}", "medium: {material: water}")
    campaign = load(path)
    # Hale & Querry 1973: n = 1.335 and 1.327 at 0.5 and 1 um.
    assert campaign.medium_index == (1.335, 1.327)
    (warning,) = campaign.warnings
    assert "the absorption of the medium water is left out" in warning.message
    grid = expand(campaign)
    ratio = grid.size_parameter / grid.radius_um * grid.wavelength_um[:, None]
    assert ratio[0] == pytest.approx(2 * 3.141592653589793 * 1.335, rel=1e-11)
    assert ratio[1] == pytest.approx(2 * 3.141592653589793 * 1.327, rel=1e-11)
    ball = grid.particle_names.index("ball")
    assert grid.refractive_index_n[ball] == pytest.approx([1.5 / 1.335, 1.5 / 1.327], rel=1e-11)


@pytest.mark.parametrize(
    ("medium", "waves", "expected"),
    [
        ("{material: water}", "[0.5, 10]", "the medium water absorbs at 10 um"),
        ("{material: watre}", "[0.5, 1.0]", "material 'watre' is not defined"),
        ("{index: 1.3, material: water}", "[0.5, 1.0]", "both index and material are given"),
    ],
)
def test_a_medium_that_cannot_be_used(written, medium, waves, expected):
    with pytest.raises(BadInput) as caught:
        path = written(
            SALT, WATER, "medium: {index: 1.0}", f"medium: {medium}", "[0.5, 1.0]", waves
        )
        load(path)
    assert any(expected in problem.message for problem in caught.value.problems)
