"""Materials in a configuration: tables, fields and densities, what they fill in and what contradicts them."""

import json
import math
from pathlib import Path

import pytest
import yaml

import mcgeo.problem
from mcgeo.errors import ConfigError
from mcgeo.runs.build import problem_from
from mcgeo.runs.config import config_from_resolved, json_schema, load_config, resolved
from mcgeo.runs.material_sample import material_of, sample_of
from mcgeo.runs.material_table import read_materials, shipped_materials

LAUGHLIN = "state: {kind: laughlin, exponent: 3, electrons: 10}\n"
MINE = """\
mine:
  mass: {tensor: [[1.0, 0.1], [0.1, 0.3]]}
  permittivity_tensor: {in_plane: [10, 14], across: 8, angle_degrees: 20}
plain: {mass: {along_axes: [0.2, 0.2]}, permittivity: 9, mass_across: 0.4}
"""


def keys_of(write, text):
    """Resolved keys, which are also those of a configuration made of them."""
    found = resolved(load_config(write(LAUGHLIN + text)))
    assert resolved(config_from_resolved(json.loads(json.dumps(found)))) == found
    return found


@pytest.fixture
def read(write):
    def _read(text):
        Path("mine.yaml").write_text(MINE)
        return keys_of(write, text)

    return _read


@pytest.fixture
def faults(write):
    def _faults(text, state=LAUGHLIN):
        Path("mine.yaml").write_text(MINE)
        with pytest.raises(ConfigError) as caught:
            load_config(write(state + text))
        return caught.value.faults

    return _faults


def test_every_shipped_number_has_a_source():
    text = Path(mcgeo.problem.__file__).with_name("materials.yaml").read_text()
    table = yaml.safe_load(text)
    assert set(shipped_materials()) == set(table)
    assert {"GaAs", "AlAs", "Si", "Ge", "black phosphorus"} <= set(table)
    for entry in table.values():
        assert entry["description"]
        for key in ("mass_source", "permittivity_source"):
            # A publication is named by its year.
            assert any(part.strip("(),;").isdigit() for part in entry[key].split()), entry[key]


# Masses along two axes and permittivities: M. Levinshtein et al. (eds.), Handbook Series on Semiconductor Parameters
# (1996, 1999), and reviews of the wells, from memory: the range of values in use.
@pytest.mark.parametrize(
    ("name", "first", "second", "permittivity"),
    [
        ("GaAs", (0.063, 0.068), (0.063, 0.068), (12.4, 13.2)),
        ("AlAs", (0.97, 1.1), (0.19, 0.22), (10.0, 10.1)),
        ("Si", (0.91, 0.98), (0.19, 0.191), (11.6, 11.9)),
        ("Ge", (1.57, 1.64), (0.08, 0.083), (15.8, 16.3)),
        ("black phosphorus", (0.07, 0.09), (0.9, 1.1), (10.5, 12.0)),
    ],
)
def test_named_materials(read, name, first, second, permittivity):
    keys = read(f"material: {{name: {name}, field_tesla: 2}}\n")
    masses = keys["material"]["mass"]["along_axes"]
    assert first[0] <= masses[0] <= first[1]
    assert second[0] <= masses[1] <= second[1]
    material = sample_of(keys).material
    assert permittivity[0] <= material.permittivity <= permittivity[1]
    assert material.label == name
    problem = problem_from(keys["problem"])
    assert problem.mass_metric.distance(material.mass_metric) < 1e-7
    assert problem.interaction.symmetry.distance(material.dielectric_metric) < 1e-7


def test_a_table_of_ones_own(read):
    turned = read("material: {file: mine.yaml, name: mine, field_tesla: 5, angle_degrees: 30}\n")
    straight = read("material: {file: mine.yaml, name: mine, field_tesla: 5}\n")
    materials = [material_of(keys["material"]) for keys in (straight, turned)]
    assert materials[0].cyclotron_mass == pytest.approx(math.sqrt(0.29))
    assert materials[0].permittivity == pytest.approx(math.sqrt(8.0 * math.sqrt(140.0)))
    # Larger permittivity along the second axis, at 110 degrees: g_eps is largest along the first.
    assert materials[0].dielectric_metric.angle_degrees == pytest.approx(20.0)
    for name in ("mass_metric", "dielectric_metric"):
        first, second = (getattr(material, name) for material in materials)
        assert second.distance(first.turned(math.radians(30.0))) < 1e-7
    problem = problem_from(turned["problem"])
    assert problem.mass_metric.distance(materials[1].mass_metric) < 1e-7
    assert problem.interaction.symmetry.distance(materials[1].dielectric_metric) < 1e-7


def test_resolved_keys_need_no_table(write):
    Path("mine.yaml").write_text(MINE)
    keys = keys_of(write, "material: {file: mine.yaml, name: plain, field_tesla: 5}\n")
    Path("mine.yaml").unlink()
    assert resolved(config_from_resolved(keys)) == keys


def test_numbers_beside_a_name_replace_those_of_the_table(read):
    keys = read("material: {name: GaAs, permittivity: 12.4}\n")["material"]
    assert (keys["permittivity"], keys["mass"]["along_axes"]) == (12.4, [0.067, 0.067])
    keys = read("material: {name: black phosphorus, permittivity: 12.4}\n")["material"]
    assert keys["permittivity_tensor"] is None
    keys = read("material: {file: mine.yaml, name: plain, mass: {along_axes: [1, 2]}}\n")["material"]
    assert keys["mass_across"] is None
    assert sample_of({"material": keys}) is None


@pytest.mark.parametrize(
    ("state", "filling"),
    [
        (LAUGHLIN, 1.0 / 3.0),
        ("state: {kind: laughlin, exponent: 3, electrons: 10, conjugate: true}\n", 2.0 / 3.0),
        ("state: {kind: moore_read, filling: 1/2, electrons: 10}\n", 0.5),
        ("state: {kind: fermi_sea, filling: 1/4, electrons: 7}\n", 0.25),
    ],
)
def test_field_and_density(write, state, filling):
    # One flux quantum per tesla on 1/(2.41798924e10 cm^-2), CODATA 2022.
    by_field = resolved(load_config(write(state + "material: {name: GaAs, field_tesla: 8}\n")))["material"]
    assert by_field["density_per_cm2"] == pytest.approx(8.0 * filling * 2.41798924e10, rel=1e-8)
    text = f"material: {{name: GaAs, density_per_cm2: {by_field['density_per_cm2']!r}}}\n"
    assert resolved(load_config(write(state + text)))["material"]["field_tesla"] == pytest.approx(8.0, rel=1e-12)
    both = f"material: {{name: GaAs, field_tesla: 8, density_per_cm2: {1.0005 * by_field['density_per_cm2']}}}\n"
    assert sample_of(resolved(load_config(write(state + both)))).field_tesla == 8.0


def test_lengths_in_nanometres(read):
    # l_B = 25.6556418 nm at 1 T, CODATA 2022.
    material = "material: {name: GaAs, field_tesla: 4}\nproblem: {interaction: "
    length = 25.6556418 / 2.0
    well = read(material + "{kind: square_well, width_nm: 20}}\n")["problem"]["interaction"]
    assert well == {"kind": "square_well", "width": pytest.approx(20.0 / length)}
    interface = read(material + "{kind: fang_howard, parameter_per_nm: 0.3}}\n")["problem"]["interaction"]
    assert interface["parameter"] == pytest.approx(0.3 * length)
    terms = "{kind: sum, terms: [{weight: 1, interaction: {kind: one_gate, distance_nm: 30}}]}}\n"
    gate = read(material + terms)["problem"]["interaction"]["terms"][0]["interaction"]
    assert gate["distance"] == pytest.approx(30.0 / length)
    # Lengths across the plane of a layered material count sqrt(eps_x/eps_z) times.
    layered = "material: {mass: {along_axes: [1, 1]}, permittivity_tensor: {in_plane: [12, 12], across: 3}, "
    gate = read(layered + "field_tesla: 4}\nproblem: {interaction: {kind: two_gates, distance_nm: 30}}\n")
    assert gate["problem"]["interaction"]["distance"] == pytest.approx(60.0 / length)


def test_level_mixing_and_confinement_follow_from_the_material(read):
    # hbar omega_c = 0.115767636 meV per tesla and inverse mass, CODATA 2022.
    text = "material: {file: mine.yaml, name: plain, field_tesla: 4}\n"
    rigid = read(text + "problem: {variation: rigid}\n")
    assert rigid["problem"]["level_mixing"] == pytest.approx(56.1266234 * 2.0 / 9.0 / (0.115767636 * 4.0 / 0.2))
    assert read(text)["problem"]["level_mixing"] is None
    tilt = read(text + "problem: {tilt: {angle_degrees: 40, direction_degrees: 15, confinement_mev: 5}}\n")
    field = problem_from(tilt["problem"]).tilt
    assert field.confinement == pytest.approx(5.0 / (0.115767636 * 4.0 / 0.2))
    assert (field.mass_across, field.permittivity_across) == pytest.approx((2.0, 1.0))
    assert (math.degrees(field.angle), math.degrees(field.direction)) == pytest.approx((40.0, 15.0))
    bare = read("problem: {level: 2, tilt: {angle_degrees: 40, confinement_ratio: 2.5, subband: 1}}\n")
    problem = problem_from(bare["problem"])
    assert (problem.level, problem.tilt.subband, problem.tilt.confinement, problem.tilt.mass_across) == (2, 1, 2.5, 1.0)


GAAS = "material: {name: GaAs, field_tesla: 4}\n"
LAYERS = "material: {name: black phosphorus, field_tesla: 4}\n"


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("material: {name: §GaAS}\n", "material.name: must be one of GaAs, AlAs, Si, Ge, black phosphorus, "),
        ("material: §{field_tesla: 3}\n", "material: needs a name, or mass and permittivity"),
        ("material: §{permittivity: 3}\n", "material: needs a name, or mass and permittivity"),
        ("material: {name: GaAs, field_tesla: §0}\n", "material.field_tesla: must be a finite number above 0"),
        ("material: {name: mine, file: §../mine.yaml}\n", "material.file: must be a path inside the folder"),
        ("material: {name: §nothing, file: mine.yaml}\n", "material.name: must be one of mine, plain, not 'nothing'"),
        ("material: {name: §x, file: none.yaml}\n", "material.name: none.yaml: there is no such file"),
        (
            "material: {name: GaAs, permittivity: 3, permittivity_tensor: §{in_plane: [1, 2], across: 3}}\n",
            "material.permittivity_tensor: does not go with permittivity; remove one of them",
        ),
        (
            "material: {name: GaAs, field_tesla: 10, density_per_cm2: §1.0e+11}\n",
            "material.density_per_cm2: 1e+11 is filling 0.333333 at 12.407 T, but field_tesla is 10, where the density "
            "is 8.05996e+10; remove one of them",
        ),
        (
            GAAS + "problem: {§mass: {ratio: 2}}\n",
            "problem.mass: a mass ratio of 2 does not go with the material, whose own is 1 at 0 degrees; remove one",
        ),
        (
            LAYERS + "problem: {interaction: {kind: coulomb, §dielectric: {ratio: 2}}}\n",
            "problem.interaction.dielectric: a ratio of 2 does not go with the material, whose own is 1.26923",
        ),
        (
            LAYERS + "problem: {interaction: {kind: §square_well, width: 1}}\n",
            "problem.interaction.kind: must be coulomb where the permittivity of the material is anisotropic",
        ),
        (
            GAAS + "problem: {variation: rigid, level_mixing: §2}\n",
            "problem.level_mixing: 2 does not go with the material, which has 1.25903 at 4 T; remove it",
        ),
        (
            GAAS + "problem: {tilt: {angle_degrees: 3, confinement_mev: 5, confinement_ratio: §3}}\n",
            "problem.tilt.confinement_ratio: 3 does not go with confinement_mev, which is 0.723432 cyclotron energies",
        ),
        (
            "problem: {tilt: {angle_degrees: 3, §confinement_mev: 5}}\n",
            "problem.tilt.confinement_mev: needs the cyclotron energy: give material with field_tesla",
        ),
        (
            "problem: {§tilt: {angle_degrees: 3}}\n",
            "problem.tilt.confinement_ratio: missing; must be a finite number above 0, unless confinement_mev",
        ),
        (
            "problem: {tilt: {angle_degrees: §90, confinement_ratio: 1}}\n",
            "problem.tilt.angle_degrees: must be a finite number from 0 to 85, not 90",
        ),
        (
            "problem: {tilt: {angle_degrees: 3, confinement_ratio: 1}, variation: §rigid, level_mixing: 1}\n",
            "problem.variation: must be projected in a tilted field, not rigid",
        ),
        (
            "problem: {interaction: {kind: §gaussian, range: 1}, tilt: {angle_degrees: 3, confinement_ratio: 1}}\n",
            "problem.interaction.kind: must be coulomb in a tilted field, not gaussian",
        ),
    ],
)
def test_each_fault_has_its_place_and_its_remedy(faults, text, expected):
    """The sign § stands where the fault must be found and is no part of the file."""
    before, after = (LAUGHLIN + text).split("§")
    line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
    (fault,) = faults(before + after, state="")
    assert fault.startswith(f"run.yaml:{line}:{column}: {expected}")


def test_lengths_in_nanometres_need_a_field(faults):
    for material in ("", "material: {name: GaAs}\n"):
        found = faults(material + "problem: {interaction: {kind: square_well, width_nm: 20}}\n")
        assert any("width_nm: needs the magnetic length: give material with field_tesla" in fault for fault in found)
    both = faults(GAAS + "problem: {interaction: {kind: square_well, width: 1, width_nm: 20}}\n")
    assert any("width_nm: does not go with width; remove one of them" in fault for fault in both)
    well = json_schema()["$defs"]["SquareWellConfig"]
    assert "nm" in well["properties"]["width_nm"]["description"]
    assert "width" not in well["required"]


def test_faults_of_a_table_have_their_place(tmp_path):
    file = tmp_path / "table.yaml"
    file.write_text(MINE + "bad: {mass: {along_axes: [1]}, permitivity: 2}\nhalf: {mass: {along_axes: [1, 1]}}\n")
    with pytest.raises(ConfigError) as caught:
        read_materials(file)
    assert [fault.removeprefix(f"{file}:").split(" ")[0] for fault in caught.value.faults] == ["5:26:", "5:32:", "6:1:"]
    assert "bad.mass.along_axes: must be a list of 2 numbers" in caught.value.faults[0]
    assert "bad.permitivity: unknown key" in caught.value.faults[1]
    assert "half: needs one of permittivity and permittivity_tensor" in caught.value.faults[2]
