"""The shipped materials and strikers against handbook tables."""

from __future__ import annotations

import math

import pytest

from resonate.errors import SceneError
from resonate.scene.presets import list_presets, material, preset_rows, striker, tables
from resonate.scene.read import parse_scene

MATERIALS = list_presets("materials")
STRIKERS = list_presets("strikers")

# Bulk longitudinal, shear and rod speeds (m/s) and density (kg/m^3): CRC Handbook of Chemistry and Physics,
# "Speed of sound in various media" (after Gray, American Institute of Physics Handbook).
# The density of cast iron is from memory.
CRC = [
    ("aluminium", 6420, 3040, 5000, 2700),
    ("brass", 4700, 2110, 3480, 8600),
    ("copper", 5010, 2270, 3750, 8930),
    ("gold", 3240, 1200, 2030, 19700),
    ("cast iron", 4994, 2809, 4480, 7700),
    ("lead", 1960, 690, 1210, 11400),
    ("monel", 5350, 2720, 4400, 8900),
    ("platinum", 3260, 1730, 2800, 21400),
    ("mild steel", 5960, 3235, 5200, 7850),
    ("tin", 3320, 1670, 2730, 7300),
    ("tungsten", 5220, 2890, 4620, 19300),
    ("zinc", 4210, 2440, 3850, 7100),
    ("borosilicate glass", 5640, 3280, 5170, 2320),
    ("pmma", 2680, 1100, 1840, 1180),
    ("polyethylene", 1950, 540, 920, 900),
    ("ice", 3990, 1980, None, 917),
]


@pytest.mark.parametrize(("name", "longitudinal", "shear", "rod", "density"), CRC)
def test_moduli_follow_from_published_sound_speeds(name, longitudinal, shear, rod, density):
    # Isotropic: nu = (c_l^2 - 2 c_s^2) / 2(c_l^2 - c_s^2), E = 2 rho c_s^2 (1 + nu), rod speed sqrt(E / rho).
    ratio = (longitudinal**2 - 2 * shear**2) / (2 * (longitudinal**2 - shear**2))
    young = 2 * density * shear**2 * (1 + ratio)
    preset = material(name)
    assert preset.isotropic
    # Stock varies: 2 % in density, 5 % in E, 0.03 in nu cover the spread of the tables.
    assert preset.density_kg_m3 == pytest.approx(density, rel=0.02)
    assert preset.young_pa[0] == pytest.approx(young, rel=0.05)
    assert preset.poisson[0] == pytest.approx(ratio, abs=0.03)
    if rod is not None:
        assert math.sqrt(preset.young_pa[0] / preset.density_kg_m3) == pytest.approx(rod, rel=0.04)


# Typical values, from memory of general handbooks (Kaye & Laby; Ashby): density, E in GPa, nu.
TYPICAL = [
    ("soda-lime glass", 2500, 72, 0.22, 0.15),
    ("porcelain", 2400, 70, 0.2, 0.3),
    ("terracotta", 1900, 15, 0.2, 0.3),
    ("concrete", 2400, 30, 0.2, 0.3),
    ("marble", 2700, 60, 0.25, 0.3),
    ("bell bronze", 8600, 100, 0.34, 0.15),
    ("spring steel", 7850, 206, 0.29, 0.15),
    ("polycarbonate", 1200, 2.35, 0.37, 0.15),
    ("pvc", 1400, 3.0, 0.38, 0.15),
    ("epoxy-carbon UD", 1550, 135, 0.3, 0.15),
    ("cork", 180, 0.02, 0.0, 0.3),
]


@pytest.mark.parametrize(("name", "density", "young_gpa", "poisson", "spread"), TYPICAL)
def test_typical_values(name, density, young_gpa, poisson, spread):
    preset = material(name)
    assert preset.density_kg_m3 == pytest.approx(density, rel=0.05)
    assert preset.young_pa[0] == pytest.approx(young_gpa * 1e9, rel=spread)
    assert preset.poisson[0] == pytest.approx(poisson, abs=0.03)


# Loss factors of metals: Cremer & Heckl, Structure-Borne Sound (1988), table of metals, as quoted in
# Irvine, Damping Properties of Materials (2004). Where the table says "about", a factor of two each way;
# where it says "below", any smaller value.
LOSSES = [
    ("aluminium", 0.3e-5, 2e-4),
    ("lead", 1e-2, 30e-2),
    ("iron", 1e-4, 6e-4),
    ("cast iron", 1e-4, 6e-4),
    ("steel", 0.2e-4, 3e-4),
    ("mild steel", 0.2e-4, 3e-4),
    ("spring steel", 0.2e-4, 3e-4),
    ("stainless steel", 0.2e-4, 3e-4),
    ("gold", 1.5e-4, 6e-4),
    ("copper", 1e-3, 4e-3),
    ("magnesium", 0.5e-4, 2e-4),
    ("brass", 0.2e-3, 1e-3),
    ("nickel", 0.0, 1e-3),
    ("silver", 4e-4, 3e-3),
    ("zinc", 1.5e-4, 6e-4),
    ("tin", 1e-3, 4e-3),
]


@pytest.mark.parametrize(("name", "least", "most"), LOSSES)
def test_metal_losses_lie_in_the_published_ranges(name, least, most):
    assert all(least <= eta <= most for _, eta in material(name).loss)


def test_zinc_and_tin_are_not_the_misprint():
    # Some tables print moduli a factor of ten too low (13.1 and 4.4 GPa);
    # the sound speeds say 105 and 54 GPa.
    assert material("zinc").young_pa[0] > 50e9
    assert material("tin").young_pa[0] > 25e9


# EL in GPa; ER, ET, GLR, GLT over EL; nuLR: USDA Wood Handbook (FPL-GTR-190), tables 5-1 and 5-2, at 12 %
# moisture, from memory.
WOODS = [
    ("spruce", 400, 11.6, 0.078, 0.043, 0.064, 0.061, 0.372),
    ("oak", 680, 12.3, 0.163, 0.072, 0.086, 0.081, 0.369),
    ("balsa", 160, 3.4, 0.046, 0.015, 0.054, 0.037, 0.229),
]


@pytest.mark.parametrize(
    ("name", "density", "long_gpa", "radial", "tangential", "glr", "glt", "nu_lr"), WOODS
)
def test_woods_have_the_ratios_of_the_wood_handbook(
    name, density, long_gpa, radial, tangential, glr, glt, nu_lr
):
    wood = material(name)
    assert not wood.isotropic
    long_pa = wood.young_pa[0]
    # Boards of one species differ by about 20 %.
    assert wood.density_kg_m3 == pytest.approx(density, rel=0.2)
    assert long_pa == pytest.approx(long_gpa * 1e9, rel=0.2)
    measured = [wood.young_pa[1], wood.young_pa[2], wood.shear_pa[0], wood.shear_pa[1]]
    assert [value / long_pa for value in measured] == pytest.approx([radial, tangential, glr, glt], rel=0.2)
    assert wood.poisson[0] == pytest.approx(nu_lr, rel=0.2)


def test_there_are_enough_and_each_says_where_it_comes_from():
    assert len(MATERIALS) >= 44
    assert len(STRIKERS) >= 18
    assert sum(not preset.isotropic for preset in MATERIALS) >= 9
    for preset in (*MATERIALS, *STRIKERS):
        assert "memory" in preset.source or "Handbook" in preset.source


@pytest.mark.parametrize("preset", MATERIALS, ids=lambda preset: preset.name)
def test_each_material_is_a_real_solid(preset):
    # Between balsa and platinum, gum rubber and alumina.
    assert 100 <= preset.density_kg_m3 <= 22000
    assert 1e6 <= min(preset.young_pa) <= max(preset.young_pa) <= 500e9
    assert all(1e-6 <= eta <= 0.3 for _, eta in preset.loss)
    given = [preset.expansion_1_k, preset.conductivity_w_mk, preset.specific_heat_j_kgk]
    assert all(value is None for value in given) or all(value is not None for value in given)


# Dulong and Petit: metals hold about 25 J/(mol K). Molar masses in kg/mol: IUPAC (2021).
MOLAR = [
    ("aluminium", 0.0269815), ("copper", 0.063546), ("gold", 0.196967), ("silver", 0.107868),
    ("lead", 0.2072),
    ("tin", 0.11871), ("zinc", 0.06538), ("titanium", 0.047867), ("tungsten", 0.18384), ("nickel", 0.058693),
    ("magnesium", 0.024305), ("platinum", 0.195084), ("iron", 0.055845),
]  # fmt: skip


@pytest.mark.parametrize(("name", "molar_kg"), MOLAR)
def test_specific_heats_of_elements_obey_dulong_and_petit(name, molar_kg):
    # Room temperature leaves them within 10 % of 3 R = 24.94 J/(mol K).
    assert material(name).specific_heat_j_kgk * molar_kg == pytest.approx(3 * 8.314463, rel=0.1)


@pytest.mark.parametrize(
    "name", ["aluminium", "copper", "gold", "silver", "brass", "tungsten", "platinum", "zinc"]
)
def test_conductivities_are_those_of_good_conductors(name):
    # Wiedemann and Franz: k = L T / rho_e, L = 2.44e-8 W Ohm/K^2; resistivities (Ohm m, 20 degC) from memory
    # of the CRC Handbook. The law holds to about 15 % for these metals.
    resistivity = {
        "aluminium": 2.65e-8, "copper": 1.68e-8, "gold": 2.21e-8, "silver": 1.59e-8, "brass": 6.4e-8,
        "tungsten": 5.3e-8, "platinum": 10.5e-8, "zinc": 5.9e-8,
    }[name]  # fmt: skip
    law = 2.44e-8 * 293.15 / resistivity
    assert material(name).conductivity_w_mk == pytest.approx(law, rel=0.3 if name == "tungsten" else 0.15)


@pytest.mark.parametrize(
    "preset", [p for p in STRIKERS if p.source[0].isdigit()], ids=lambda preset: preset.name
)
def test_balls_have_the_mass_of_their_size(preset):
    # The source names diameter and matter: mass = rho pi d^3 / 6.
    diameter_m = float(preset.source.split(" mm ball")[0]) / 1000
    assert preset.tip_radius_m == pytest.approx(diameter_m / 2)
    density = preset.mass_kg / (math.pi / 6 * diameter_m**3)
    matter = preset.source.split("ball of ")[1].split(";")[0].split(",")[0]
    known = {**{p.name: p.density_kg_m3 for p in MATERIALS}, "boxwood": 950.0}
    assert density == pytest.approx(known[matter], rel=0.01)  # masses have three digits


def test_softer_felt_is_softer_and_fingers_are_softer_than_wood():
    order = [
        "felt soft",
        "felt medium",
        "felt hard",
        "hard rubber",
        "wooden knob",
        "nylon",
        "glass marble",
        "steel ball",
    ]
    moduli = [striker(name).tip_young_pa for name in order]
    assert moduli == sorted(moduli)
    assert striker("fingertip").tip_young_pa < striker("soft rubber").tip_young_pa


@pytest.mark.parametrize(
    ("name", "suggestion"),
    [
        ("bras", "brass"),
        ("Bell Bronse", "bell bronze"),
        ("alumnium", "aluminium"),
        ("glass", "soda-lime glass"),
    ],
)
def test_unknown_materials_are_refused_with_the_nearest_name(name, suggestion):
    with pytest.raises(SceneError, match=f"did you mean '{suggestion}'"):
        material(name)


def test_unknown_strikers_are_refused_with_the_nearest_name():
    with pytest.raises(SceneError, match="did you mean 'felt soft'"):
        striker("felt sof")


def test_names_do_not_mind_case_and_dashes():
    assert material("Soda Lime Glass") == material("soda-lime glass")
    assert striker("Felt_soft") == striker("felt soft")


@pytest.mark.parametrize(("kind", "count"), [("materials", len(MATERIALS)), ("strikers", len(STRIKERS))])
def test_tables_for_reading(kind, count):
    table = preset_rows(kind)
    assert len(table.rows) == count
    assert {len(row) for row in table.rows} == {len(table.headings)}
    assert ("7850" if kind == "materials" else "7.5") in table.rows[0]


def test_an_unknown_kind_is_refused():
    with pytest.raises(SceneError, match="did you mean 'materials'"):
        list_presets("material")


def test_the_tables_are_what_the_file_says():
    assert list(tables("materials")) == [preset.name for preset in MATERIALS]


def used(text):
    body = "[take]\nlength = 1\n[[body]]\nname = 'a'\nshape = 'bar'\nlength = 1\ndiameter = 0.01\n"
    return parse_scene(f"{body}material = {text}").bodies[0].material


def test_an_override_changes_what_it_names_and_keeps_the_rest():
    brass, changed = material("brass"), used("{from = 'brass', loss = 0.004}")
    assert changed.loss[0][1] == 0.004
    assert changed.young_pa == brass.young_pa
    assert changed.conductivity_w_mk == brass.conductivity_w_mk
    assert "changed in the scene: loss" in changed.source


def test_an_override_of_young_or_poisson_moves_the_shear_modulus():
    # G = E / 2(1 + nu), isotropic.
    assert used("{from = 'brass', young = '90 GPa'}").shear_pa[0] == pytest.approx(90e9 / (2 * 1.37))
    assert used("{from = 'brass', poisson = 0.3}").shear_pa[0] == pytest.approx(105e9 / 2.6)
    assert used("{from = 'brass', shear = '40 GPa'}").poisson[0] == pytest.approx(105 / 80 - 1)
    assert used("{from = 'oak', density = 700}").young_pa == material("oak").young_pa


def test_one_value_for_a_wood_of_three_directions_is_refused():
    with pytest.raises(SceneError, match="one value"):
        used("{from = 'oak', young = '12 GPa'}")
    one = used("{from = 'oak', young = '12 GPa', poisson = 0.3}")
    assert one.isotropic
