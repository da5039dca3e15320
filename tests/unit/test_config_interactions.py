"""Interactions in the configuration: what each key becomes, and every fault with its place."""

import math
from pathlib import Path

import numpy as np
import pytest

from mcgeo.errors import ConfigError
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.combination import Combination
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.dipole import Dipole
from mcgeo.problem.interaction import INTERACTIONS
from mcgeo.problem.pseudopotential_sum import PseudopotentialSum
from mcgeo.problem.screened import Yukawa
from mcgeo.problem.table import IsotropicTable
from mcgeo.runs.build import interaction_from
from mcgeo.runs.config import Config, config_from_resolved, json_schema, load_config, resolved
from mcgeo.runs.table_file import without_contents

STATE = "state: {kind: laughlin, exponent: 3, electrons: 10}\n"

# One configuration of every kind, and the name the interaction has in reports.
KINDS = {
    "{kind: coulomb, dielectric: {ratio: 4, angle_degrees: 30}}": "Coulomb in a dielectric of ratio 4 at 30 degrees",
    "{kind: gaussian, range: 1.5}": "Gaussian of range 1.5 l_B",
    "{kind: yukawa, screening: 0.4}": "Yukawa of screening 0.4/l_B",
    "{kind: one_gate, distance: 2}": "Coulomb with a gate at 2 l_B",
    "{kind: two_gates, distance: 2}": "Coulomb between gates at 2 l_B on either side",
    "{kind: square_well, width: 0}": "Coulomb in a square well of width 0 l_B",
    "{kind: fang_howard, parameter: 3}": "Coulomb at a Fang-Howard interface of parameter 3/l_B",
    "{kind: gaussian_well, width: 0.7}": "Coulomb in a Gaussian layer of standard deviation 0.7 l_B",
    "{kind: softened, distance: 1}": "Coulomb softened at 1 l_B",
    "{kind: power_law, exponent: 1.5}": "power law 1/r^1.5",
    "{kind: dipole, thickness: 0.2, tilt_degrees: 40, direction_degrees: 90, strength: 2}": (
        "dipoles in a layer of 0.2 l_B, strength 2, tilted by 40 towards 90 degrees"
    ),
    "{kind: pseudopotentials, values: {3: 0.2, 1: 1.0}, metric: {stretch: 0.5}}": (
        "pseudopotentials V_1 = 1, V_3 = 0.2 of the metric of stretch 0.5 at 0 degrees"
    ),
    "{kind: table, file: potentials/v.csv}": "table potentials/v.csv",
    "{kind: sum, terms: [{weight: 0.5, interaction: {kind: coulomb}}, {weight: -1, interaction: {kind: softened, "
    "distance: 2}}]}": "0.5 x (Coulomb) + -1 x (Coulomb softened at 2 l_B)",
}


def table(values=lambda q: 2.0 * math.pi / q, last=12.0, step=0.2):
    lines = [f"{q!r}, {values(q)!r}" for q in np.arange(step, last + 0.5 * step, step).tolist()]
    return "\n".join(["# made for a test", "q [1/l_B], V [e^2 l_B/(4 pi eps)]", *lines]) + "\n"


@pytest.fixture
def config_of(write):
    """Configuration with an interaction, in a folder that also holds potentials/v.csv."""

    def load(interaction: str) -> Config:
        path = write(f"{STATE}problem: {{interaction: {interaction}}}\n")
        Path("potentials").mkdir(exist_ok=True)
        Path("potentials/v.csv").write_text(table(), encoding="utf-8")
        return load_config(path)

    return load


def interaction_of(config):
    return interaction_from(resolved(config)["problem"]["interaction"])


@pytest.mark.parametrize(("text", "name"), KINDS.items())
def test_every_kind_is_made_and_survives_resolving(config_of, text, name):
    config = config_of(text)
    made = interaction_of(config)
    assert made.name == name
    again = config_from_resolved(resolved(config))
    assert again == config
    q = np.array([[0.3, 0.9], [2.0, -1.0]])
    np.testing.assert_array_equal(interaction_of(again).potential(q), made.potential(q))


def test_no_kind_is_left_out():
    assert {text.split()[1].rstrip(",") for text in KINDS} == set(INTERACTIONS)
    schema = json_schema()["$defs"]["ProblemConfig"]["properties"]["interaction"]
    assert set(schema["discriminator"]["mapping"]) == set(INTERACTIONS)


def test_groups_and_degrees_arrive_as_what_they_mean(config_of):
    coulomb, dipole, pseudo, combined = (
        interaction_of(config_of(next(text for text in KINDS if f"kind: {kind}," in text)))
        for kind in ("coulomb", "dipole", "pseudopotentials", "sum")
    )
    assert coulomb == Coulomb(UnimodularMetric(math.log(2.0), math.radians(30.0)))
    assert dipole == Dipole(0.2, math.radians(40.0), math.radians(90.0), 2.0)
    assert pseudo == PseudopotentialSum({1: 1.0, 3: 0.2}, UnimodularMetric(0.5))
    assert isinstance(combined, Combination)
    assert [weight for weight, _ in combined.terms] == [0.5, -1.0]
    nested = "{kind: sum, terms: [{weight: 2, interaction: {kind: sum, terms: [{weight: 3, interaction: {kind: yukawa, "
    inner = interaction_of(config_of(nested + "screening: 1}}]}}]}")).terms[0][1]
    assert inner == Combination(((3.0, Yukawa(1.0)),))


FAULTS = [
    ("{kind: coulomb, dielectric: {ratio: §0}}", "dielectric.ratio: must be a finite number above 0, not 0"),
    ("{kind: coulomb, §dielectric: {}}", "dielectric.ratio: missing; must be a finite number above 0"),
    ("{kind: coulomb, dielectric: §4}", "dielectric: must be a group of keys (ratio, angle_degrees), not 4"),
    ("{kind: coulomb, §rage: 1}", "rage: unknown key; allowed are kind, dielectric"),
    ("{kind: coulomb, §range: 1}", "range: does not go with kind coulomb; allowed are kind, dielectric"),
    ("{kind: one_gate, distance: §0}", "distance: must be a finite number above 0, not 0"),
    ("{kind: square_well, width: §-1}", "width: must be a finite number of at least 0, not -1"),
    ("{kind: square_well, §distance: 1, width: 1}",
     "distance: does not go with kind square_well; allowed are kind, width"),
    ("{kind: power_law, exponent: §2}", "exponent: must be a finite number above 0 and below 2, not 2"),
    ("{kind: dipole, thickness: 1, tilt_degrees: §91}", "tilt_degrees: must be a finite number from 0 to 90, not 91"),
    ("{kind: pseudopotentials, values: {1: 1, §16: 1}}",
     "values.16: a key must be a relative angular momentum, a whole number from 0 to 15, not '16'"),
    ("{kind: pseudopotentials, values: {§V1: 1}}", "values.V1: a key must be a relative angular momentum"),
    ("{kind: pseudopotentials, values: {1: §one}}", "values.1: must be a finite number, not 'one'"),
    ("{kind: pseudopotentials, values: §{}}", "values: must hold at least one value, as in {1: 1.0}"),
    ("{kind: pseudopotentials, values: §[1, 2]}", "values: must be a group of keys, not [1, 2]"),
    ("{kind: pseudopotentials, values: {1: 1}, metric: {stretch: §6}}",
     "metric.stretch: must be a finite number from 0 to 5, not 6"),
    ("{kind: sum, terms: §[]}", "terms: must hold at least one term"),
    ("{kind: sum, terms: §{weight: 1}}", "terms: must be a list of groups of keys (weight, interaction), not "),
    ("{kind: sum, terms: [§{interaction: {kind: coulomb}}]}", "terms[0].weight: missing; must be a finite number"),
    ("{kind: sum, terms: [{weight: 1, interaction: {kind: coulomb}}, §3]}",
     "terms[1]: must be a group of keys (weight, interaction), not 3"),
    ("{kind: sum, terms: [{weight: 1, interaction: {kind: §coulom}}]}",
     "terms[0].interaction.kind: must be one of coulomb, "),
    ("{kind: sum, terms: [{weight: 1, interaction: {kind: yukawa, screening: §x}}]}",
     "terms[0].interaction.screening: must be a finite number of at least 0, not 'x'"),
    ("{kind: table, file: §3}", "file: must be a text, not 3"),
    ("{kind: table, file: §no.csv}", "file: no.csv: there is no such file"),
    ("{kind: table, file: §../run.yaml}", "file: must be a path inside the folder of the configuration, not "),
    ("{kind: table, file: §/etc/hostname}", "file: must be a path inside the folder of the configuration, not "),
    ("{kind: sum, terms: [{weight: 1, interaction: {kind: table, file: §run.yaml}}]}",
     "terms[0].interaction.file: run.yaml: line 1: the header must be 'q [1/l_B], V [e^2 l_B/(4 pi eps)]' or "),
]  # fmt: skip


@pytest.mark.parametrize(("text", "expected"), FAULTS)
def test_each_fault_has_its_place_and_its_remedy(config_of, text, expected):
    """The sign § stands where the fault must be found and is no part of the file."""
    before, after = text.split("§")
    with pytest.raises(ConfigError) as caught:
        config_of(before + after)
    (fault,) = caught.value.faults
    column = len("problem: {interaction: " + before) + 1
    assert fault.startswith(f"run.yaml:2:{column}: problem.interaction.{expected}")


def test_the_table_is_found_next_to_its_configuration(tmp_path, monkeypatch):
    folder = tmp_path / "elsewhere"
    folder.mkdir()
    (folder / "v.csv").write_text(table(), encoding="utf-8")
    (folder / "run.yaml").write_text(STATE + "problem: {interaction: {kind: table, file: v.csv}}\n", encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    config = load_config("elsewhere/run.yaml")
    # What was read once needs the file no more.
    keys = resolved(config)
    (folder / "v.csv").unlink()
    made = interaction_from(resolved(config_from_resolved(keys))["problem"]["interaction"])
    assert isinstance(made, IsotropicTable)
    assert without_contents(keys["problem"])["interaction"] == {"kind": "table", "file": "v.csv"}


def test_a_table_may_not_be_linked_from_outside(tmp_path, monkeypatch):
    folder = tmp_path / "inside"
    folder.mkdir()
    (tmp_path / "v.csv").write_text(table(), encoding="utf-8")
    (folder / "v.csv").symlink_to(tmp_path / "v.csv")
    (folder / "run.yaml").write_text(STATE + "problem: {interaction: {kind: table, file: v.csv}}\n", encoding="utf-8")
    with pytest.raises(ConfigError, match="links out of it"):
        load_config(folder / "run.yaml")
