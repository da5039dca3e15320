"""Configurations: defaults, meaning, identity, schema."""

import json
import re
import subprocess
import sys
from fractions import Fraction

import pytest
from pydantic import ValidationError

from mcgeo.runs.config import (
    Config,
    config_from_resolved,
    differing_keys,
    json_schema,
    load_config,
    resolved,
    state_identity,
)
from mcgeo.runs.geometry_config import ModulusCellConfig, NamedCellConfig
from mcgeo.runs.problem_config import MassAxesConfig, MassTensorConfig

LAUGHLIN = "state: {kind: laughlin, exponent: 3, electrons: 10}\n"
MOORE_READ = "state: {kind: moore_read, filling: 1/2, electrons: 10}\n"


def test_a_state_is_all_that_is_needed(write):
    config = load_config(write(LAUGHLIN))
    assert resolved(config) == {
        "state": {
            "kind": "laughlin",
            "exponent": 3,
            "electrons": 10,
            "metric": {"stretch": 0.0, "angle_degrees": 0.0},
            "conjugate": False,
        },
        "geometry": {"kind": "torus"},
        "cell": {"shape": "hexagonal"},
        "sampling": {
            "walkers": 32,
            "sweeps": 20000,
            "equilibration": 500,
            "blocks": 16,
            "measure_every": None,
            "step": None,
            "seed": 1,
            "threads": None,
            "checkpoint_seconds": 60.0,
            "q_max": 8.0,
            "target_error": None,
            "target_quantity": None,
            "most_sweeps": None,
        },
        "material": None,
        "problem": {
            "mass": {"ratio": 1.0, "angle_degrees": 0.0},
            "interaction": {"kind": "coulomb", "dielectric": {"ratio": 1.0, "angle_degrees": 0.0}},
            "level": 0,
            "tilt": None,
            "variation": "projected",
            "level_mixing": None,
        },
        "scan": {"stretch": {"from": 0.0, "to": 2.0, "points": 41}, "angle_degrees": None, "road": "plane"},
    }


def test_values_arrive_as_what_they_mean(write):
    text = """\
state: {kind: fermi_sea, filling: 2/4, electrons: 3, points: [[0, 0], [1, 0], [0, -1]], conjugate: true}
cell: {tau: [0, 1]}
sampling: {sweeps: 2e4, q_max: 6, seed: null}
problem:
  mass: {tensor: [[0.2, 1e-2], [0.01, 2]]}
  interaction: {kind: gaussian, range: 1}
scan: {stretch: {from: -1, to: 1}, angle_degrees: 30}
"""
    config = load_config(write(text))
    assert config.state.kind == "fermi_sea"
    assert config.state.filling == Fraction(1, 2)
    assert config.state.points == ((0, 0), (1, 0), (0, -1))
    assert config.cell == ModulusCellConfig(tau=(0.0, 1.0))
    assert isinstance(config.sampling.sweeps, int)
    assert isinstance(config.sampling.q_max, float)
    assert config.sampling.seed is None
    assert config.problem.mass == MassTensorConfig(tensor=((0.2, 0.01), (0.01, 2.0)))
    assert config.problem.interaction.kind == "gaussian"
    assert config.scan.stretch.from_ == -1.0
    assert resolved(config)["state"]["filling"] == "1/2"
    assert resolved(config)["sampling"]["seed"] is None


@pytest.mark.parametrize("filling", ["1", "'1'", "1/1"])
def test_bosons_at_filling_one(write, filling):
    config = load_config(write(f"state: {{kind: moore_read, filling: {filling}, electrons: 4, sector: 2}}\n"))
    assert config.state.kind == "moore_read"
    assert config.state.filling == 1
    assert config.state.sector == 2


def test_a_target_has_a_quantity_and_a_limit(write):
    config = load_config(write(LAUGHLIN + "sampling: {target_error: 1e-5, sweeps: 4000}\n"))
    assert (config.sampling.target_quantity, config.sampling.most_sweeps) == ("energy", 128_000)
    assert config_from_resolved(resolved(config)) == config


def test_configurations_are_immutable(write):
    config = load_config(write(LAUGHLIN))
    with pytest.raises(ValidationError):
        config.sampling.walkers = 3
    assert hash(config) == hash(load_config("run.yaml"))


def test_the_disk_has_neither_cell_nor_sector(write):
    config = load_config(write(MOORE_READ + "geometry: {kind: disk}\n"))
    assert config.cell is None
    data = resolved(config)
    assert "cell" not in data
    assert "sector" not in data["state"]
    assert config_from_resolved(data) == config
    assert "cell" not in state_identity(config)


def test_configurations_made_in_python_are_held_to_the_same_rules():
    state = {"kind": "fermi_sea", "filling": Fraction(1, 2), "electrons": 7}
    assert Config.model_validate({"state": state}).cell == NamedCellConfig(shape="hexagonal")
    mass = MassAxesConfig(along_axes=(0.2, 1.0))
    assert Config.model_validate({"state": state, "problem": {"mass": mass}}).problem.mass == mass
    with pytest.raises(ValidationError, match="must be laughlin or moore_read on a disk"):
        Config.model_validate({"state": state, "geometry": {"kind": "disk"}})


def test_identity_of_a_sampling(write):
    first = load_config(write(LAUGHLIN))
    second = load_config(
        write(LAUGHLIN + "sampling: {threads: 2, checkpoint_seconds: 5}\nproblem: {level: 1}\nscan: {road: torus}\n")
    )
    other = load_config(write(LAUGHLIN + "sampling: {seed: 2}\n"))
    assert state_identity(first) == state_identity(second)
    assert state_identity(first) != state_identity(other)
    assert set(state_identity(first)) == {"state", "geometry", "cell", "sampling"}
    assert not {"threads", "checkpoint_seconds"} & set(state_identity(first)["sampling"])


def test_differing_keys_name_both_values(write):
    a = resolved(load_config(write(LAUGHLIN + "sampling: {walkers: 8, seed: null}\n")))
    b = resolved(load_config(write(LAUGHLIN + "cell: {tau: [0, 1]}\nproblem: {level: 1}\n")))
    assert differing_keys(a, b, ["state", "cell", "sampling"]) == [
        "cell.shape: 'hexagonal' and not given",
        "cell.tau: not given and [0.0, 1.0]",
        "sampling.walkers: 8 and 32",
        "sampling.seed: null and 1",
    ]
    assert differing_keys(a, b, ["problem"]) == ["problem.level: 0 and 1"]
    assert differing_keys(a, a, a) == []
    assert differing_keys({}, {"sampling": {"seed": None}}, ["sampling"]) == [
        "sampling.seed: not given and null"
    ]


def _fields(schema):
    for group in [schema, *schema["$defs"].values()]:
        for name, field in group["properties"].items():
            yield f"{group['title']}.{name}", field, schema


def _has_description(field, schema):
    target = schema["$defs"][field["$ref"].rpartition("/")[2]] if "$ref" in field else {}
    return bool(field.get("description") or target.get("description"))


def test_the_schema_is_json_and_describes_every_field_with_its_unit():
    schema = json.loads(json.dumps(json_schema(), allow_nan=False))
    assert schema["$schema"].startswith("https://json-schema.org/")
    assert schema["required"] == ["state"]
    assert all(group["additionalProperties"] is False for group in [schema, *schema["$defs"].values()])
    assert schema["$defs"]["SamplingConfig"]["properties"]["walkers"]["minimum"] == 1
    assert {"from", "to"} < set(schema["$defs"]["StretchRangeConfig"]["properties"])
    for name, field, whole in _fields(schema):
        assert _has_description(field, whole), name
        types = {form.get("type") for form in [field, *field.get("anyOf", ())]}
        if types & {"number", "integer", "array"}:
            assert re.search(r"\[[^\[\]]+\]\.$", field["description"]), name


def test_reading_a_configuration_loads_no_numerical_library():
    code = (
        "import sys, mcgeo.runs.config; "
        "sys.exit(bool({'numpy', 'numba', 'scipy', 'matplotlib', 'h5py'} & set(sys.modules)))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
