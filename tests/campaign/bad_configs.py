"""Bad campaign files, each with the exact message it must give.

Every entry replaces pieces of `GOOD` by others; an empty piece appends to the end.
"""

GOOD = """\
campaign: saltmere
title: Silt and salt
wavelengths_um: [0.5, 1.0]
medium: {index: 1.0}
materials:
  silt: {n: 1.53, k: 0.003}
  salt: {n: 1.5, k: 0.0}
particles:
  - name: plate
    material: silt
    shape: {kind: spheroid, equatorial_to_polar: 2.0}
  - name: ball
    material: salt
    shape: {kind: sphere}
sizes:
  radius_um: {from: 0.1, to: 1.0, ratio: 1.2}
angles_deg: {from: 0, to: 180, step: 1}
orientation: random
accuracy: {f11_relative: 0.02, ratio_absolute: 0.01, efficiency_relative: 0.005}
populations:
  - name: haze
    particles: {plate: 0.7, ball: 0.3}
    size: {kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}
solver: {levels: [12, 16, 24], job_seconds: 20}
"""

EDITS = {
    # YAML itself
    "tab": ("\n  silt:", "\n\tsilt:"),
    "open bracket": ("[0.5, 1.0]", "[0.5, 1.0"),
    "open quote": ("title: Silt and salt", 'title: "Silt and salt'),
    "bad indentation": ("\n    material: salt", "\n   material: salt"),
    "duplicate key": ("\nmedium:", "\ntitle: Again\nmedium:"),
    "duplicate key in section": ("k: 0.003}", "k: 0.003, n: 1.4}"),
    "two documents": ("", "---\ncampaign: two\n"),
    "python tag": ("title: Silt and salt", "title: !!python/name:os.system ''"),
    "merge key": ("{n: 1.5, k: 0.0}", "{<<: {n: 1.5}, k: 0.0}"),
    "undefined alias": ("title: Silt and salt", "title: *silt"),
    "recursive alias": ("medium: {index: 1.0}", "medium: &a {index: *a}"),
    "number as key": ("  silt: {", "  1: {"),
    "YAML 1.1": ("campaign: saltmere", "%YAML 1.1\n---\ncampaign: saltmere"),
    "control character": ("Silt and salt", "Silt \x07 salt"),
    # keys
    "unknown top key": ("wavelengths_um", "wavelength_um"),
    "unknown key in section": ("ratio: 1.2", "ratoi: 1.2"),
    "unknown key, nothing near": ("{index: 1.0}", "{index: 1.0, temperature: 300}"),
    "unknown key of a shape": ("{kind: sphere}", "{kind: sphere, equatorial_to_polar: 2}"),
    "missing top key": ("title: Silt and salt\n", ""),
    "missing key in section": ("name: ball\n    material: salt", "name: ball"),
    "missing kind": ("{kind: sphere}", "{radius: 1}"),
    # types
    "number as text": ("n: 1.53", "n: '1.53'"),
    "decimal comma": ("n: 1.53", 'n: "1,53"'),
    "yes is text": ("index: 1.0", "index: yes"),
    "true is no number": ("index: 1.0", "index: true"),
    "complex medium": ("index: 1.0", "index: 1.33+0.01i"),
    "text for a list": ("[0.5, 1.0]", "0.5"),
    "list for a mapping": ("medium: {index: 1.0}", "medium: [1.0]"),
    "nothing": ("medium: {index: 1.0}", "medium:"),
    "number for text": ("title: Silt and salt", "title: 12"),
    "fraction for a count": ("ratio: 1.2", "count: 8.5"),
    "text for a grid": ("{from: 0, to: 180, step: 1}", "all"),
    "text for a shape": ("{kind: sphere}", "sphere"),
    # bounds and choices
    "aspect out of range": ("equatorial_to_polar: 2.0", "equatorial_to_polar: 12"),
    "not a number": ("k: 0.003", "k: .nan"),
    "infinite": ("[0.5, 1.0]", "[0.5, .inf]"),
    "negative absorption": ("k: 0.003", "k: -0.003"),
    "accuracy out of range": ("f11_relative: 0.02", "f11_relative: 2"),
    "wavelength of zero": ("[0.5, 1.0]", "[0, 1.0]"),
    "unknown kind": ("{kind: sphere}", "{kind: sphare}"),
    "unknown orientation": ("orientation: random", "orientation: aligned"),
    "campaign name": ("campaign: saltmere", "campaign: ../saltmere"),
    "particle name": ("name: ball", "name: big ball"),
    "material name": ("  silt: {", "  silt/2: {"),
    "long title": ("Silt and salt", "S" * 201),
    "empty list": ("[0.5, 1.0]", "[]"),
    "odd level": ("[12, 16, 24]", "[12, 15, 24]"),
    "one level": ("[12, 16, 24]", "[12]"),
    "two axes": ("{kind: sphere}", "{kind: ellipsoid, axes: [1, 2]}"),
    "two edges": ("{kind: sphere}", "{kind: cuboid, edges: [1, 2]}"),
    "flat cuboid": ("{kind: sphere}", "{kind: cuboid, edges: [1, 2, 0.1]}"),
    "negative edge": ("{kind: sphere}", "{kind: cuboid, edges: [1, 2, -1]}"),
    "two sides": ("{kind: sphere}", "{kind: prism, sides: 2, height_to_width: 1}"),
    "half a side": ("{kind: sphere}", "{kind: prism, sides: 6.5, height_to_width: 1}"),
    "prism without height": ("{kind: sphere}", "{kind: prism, sides: 6}"),
    "long prism": ("{kind: sphere}", "{kind: prism, sides: 6, height_to_width: 30}"),
    "coating without size": ("{kind: sphere}", "{kind: sphere}\n    coating: {material: silt}"),
    "coating with two sizes": (
        "{kind: sphere}",
        "{kind: sphere}\n    coating: "
        "{material: silt, core_radius_fraction: 0.5, core_volume_fraction: 0.5}",
    ),
    "coating thickness": (
        "{kind: sphere}",
        "{kind: sphere}\n    coating: {material: silt, thickness_um: 0.1}",
    ),
    "core as large as the particle": (
        "{kind: sphere}",
        "{kind: sphere}\n    coating: {material: silt, core_radius_fraction: 1.0}",
    ),
    "coating of the core's material": (
        "{kind: sphere}",
        "{kind: sphere}\n    coating: {material: salt, core_radius_fraction: 0.5}",
    ),
    "long ellipsoid": ("{kind: sphere}", "{kind: ellipsoid, axes: [1, 2, 20]}"),
    # checks within a section
    "descending range": ("from: 0.1, to: 1.0", "from: 1.0, to: 0.1"),
    "ratio of one": ("ratio: 1.2", "ratio: 1"),
    "no step rule": (", ratio: 1.2", ""),
    "two step rules": ("ratio: 1.2", "ratio: 1.2, count: 10"),
    "too many sizes": ("ratio: 1.2", "ratio: 1.0000001"),
    "both size keys": ("\nangles", "\n  size_parameter: [1, 2]\nangles"),
    "no size key": ("radius_um: {from: 0.1, to: 1.0, ratio: 1.2}", "{}"),
    "repeated size": ("{from: 0.1, to: 1.0, ratio: 1.2}", "[0.1, 0.2, 0.2]"),
    "step does not divide": ("step: 1}", "step: 7}"),
    "angle too large": ("to: 180", "to: 181"),
    "angles not ascending": ("{from: 0, to: 180, step: 1}", "[0, 90, 45]"),
    "wavelengths not ascending": ("[0.5, 1.0]", "[1.0, 0.5]"),
    "n without k": ("{n: 1.5, k: 0.0}", "{n: 1.5}"),
    "constants and table": ("{n: 1.5, k: 0.0}", "{n: 1.5, k: 0.0, table: a.csv}"),
    "mixed lognormal": ("geometric_sd: 1.3", "effective_variance: 0.1"),
    "gamma too wide": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: gamma, effective_radius_um: 0.2, effective_variance: 0.5}",
    ),
    "weight of zero": ("ball: 0.3", "ball: 0"),
    "weighted effective radius": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: lognormal, effective_radius_um: 0.2, effective_variance: 0.1, by: volume}",
    ),
    "infinitely many particles": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: modified_gamma, mode_radius_um: 0.2, alpha: 2, gamma: 1, by: volume}",
    ),
    "power law upside down": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: power_law, exponent: 4, smallest_um: 0.9, largest_um: 0.1}",
    ),
    "unknown weighting": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: power_law, exponent: 4, smallest_um: 0.1, largest_um: 0.9, by: mass}",
    ),
    "missing table of sizes": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: tabulated, table: sizes.csv}",
    ),
    "table and points of sizes": (
        "{kind: lognormal, radius_um: 0.2, geometric_sd: 1.3}",
        "{kind: tabulated}",
    ),
    "sizes of a particle without a share": (
        "geometric_sd: 1.3}",
        "geometric_sd: 1.3}\n    sizes: {bal: {kind: gamma, effective_radius_um: 0.2, "
        "effective_variance: 0.1}}",
    ),
    "mass without density": ("{plate: 0.7, ball: 0.3}", "{plate: 1}\n    shares_by: mass"),
    "density out of range": ("k: 0.003}", "k: 0.003, density_g_cm3: 2650}"),
    "odd streams": ("", "exchange: {streams: 15}\n"),
    # bodies
    "ends that meet": (
        "{kind: sphere}",
        "{kind: prism, sides: 6, height_to_width: 0.2, end_tilts_deg: [-40, 40]}",
    ),
    "indented and rounded": (
        "{kind: sphere}",
        "{kind: prism, sides: 6, height_to_width: 1, indentation: 0.4, edge_radius_fraction: 0.2}",
    ),
    "fractal law of no cluster": (
        "{kind: sphere}",
        "{kind: fractal_cluster, monomers: 16, fractal_dimension: 1.8, fractal_prefactor: 3.5, "
        "seed: 1}",
    ),
    "two correlations": (
        "{kind: sphere}",
        "{kind: gaussian_sphere, radius_deviation: 0.1, correlation_angle_deg: 30, "
        "power_law_exponent: 4, seed: 1}",
    ),
    "inclusion at the surface": (
        "{kind: sphere}",
        "{kind: cuboid, edges: [1, 1, 1]}\n    inclusions: "
        "[{material: silt, radius_fraction: 0.5, centre: [0.5, 0, 0]}]",
    ),
    "inclusion without place": (
        "{kind: sphere}",
        "{kind: sphere}\n    inclusions: [{material: silt, radius_fraction: 0.5}]",
    ),
    "inclusions in a coated particle": (
        "{kind: sphere}",
        "{kind: sphere}\n    coating: {material: silt, core_radius_fraction: 0.5}\n"
        "    inclusions: [{count: 3, volume_fraction: 0.1, seed: 1}]",
    ),
    "layers that grow": (
        "{kind: sphere}",
        "{kind: sphere}\n    layers: [{material: silt, inner_radius_fraction: 0.5}, "
        "{material: salt, inner_radius_fraction: 0.6}]",
    ),
    "layers too thick": (
        "{kind: sphere}",
        "{kind: cuboid, edges: [1, 1, 1]}\n    layers: [{material: silt, thickness_fraction: 0.9}]",
    ),
    "unknown material of a layer": (
        "{kind: sphere}",
        "{kind: sphere}\n    layers: [{material: slit, inner_radius_fraction: 0.5}]",
    ),
    # checks between sections
    "unknown material": ("material: salt", "material: silk"),
    "unknown material of a coating": (
        "{kind: sphere}",
        "{kind: sphere}\n    coating: {material: slit, core_radius_fraction: 0.5}",
    ),
    "repeated particle": ("name: ball", "name: Plate"),
    "unknown particle in population": ("ball: 0.3", "bal: 0.3"),
    "metal": ("{n: 1.5, k: 0.0}", "{n: 0.2, k: 3.4}"),
    "index of the medium": ("{n: 1.5, k: 0.0}", "{n: 1.0, k: 0.0}"),
    "missing table": ("{n: 1.5, k: 0.0}", "{table: salt.csv}"),
    "short spectrum": ("{n: 1.5, k: 0.0}", "{spectrum: [{wavelength_um: 0.5, n: 1.5, k: 0}]}"),
    "too many cells": ("[0.5, 1.0]", "[1, 2, 3, 4, 5, 6]", "ratio: 1.2", "count: 100000"),
    "several at once": (
        *("medium: {index: 1.0}", "medum: 3\nmedium: {index: 0.5}"),
        *("material: salt", "material: slat"),
        *("{n: 1.53, k: 0.003}", "{table: silt.csv}"),
    ),
}


def edited(*pieces: str) -> str:
    """Return `GOOD` with each (old, new) pair of pieces exchanged once."""
    text = GOOD
    for old, new in zip(pieces[::2], pieces[1::2], strict=True):
        assert old in text
        text = text.replace(old, new, 1) if old else text + new
    return text
