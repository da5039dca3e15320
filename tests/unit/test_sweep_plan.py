"""From axes to points: values, exclusions, what points share, and faults at their places."""

from __future__ import annotations

import json
import math
import subprocess
import sys
from pathlib import Path

import pytest

from mcgeo.errors import ConfigError
from mcgeo.runs.config import load_config, resolved
from mcgeo.runs.sweep_axes import key_path, range_values
from mcgeo.runs.sweep_config import RangeAxisConfig
from mcgeo.runs.sweep_plan import has_sweep, load_sweep, point_of
from mcgeo.runs.sweep_positions import replaced

BASE = """\
state: {kind: laughlin, exponent: 3, electrons: 4}
sampling: {seed: 5, sweeps: 480}
problem:
  mass: {ratio: 2.0}
  interaction: {kind: square_well, width: 1.0}
"""


def sweep_of(*axes: str, exclude: str = "", base: str = BASE) -> str:
    lines = "".join(f"    - {axis}\n" for axis in axes)
    return f"{base}sweep:\n  axes:\n{lines}" + (f"  exclude:\n    - {exclude}\n" if exclude else "")


def faults_of(path: str) -> list[str]:
    with pytest.raises(ConfigError) as caught:
        load_sweep(path)
    return caught.value.faults


def pointed_at(faults: list[str]) -> list[tuple[str, str]]:
    """What stands in the file where each fault points, and what the fault says."""
    lines = Path("run.yaml").read_text().splitlines()
    found = []
    for fault in faults:
        _, line, column, said = fault.split(":", 3)
        found.append((lines[int(line) - 1][int(column) - 1 :], said.strip()))
    return found


def check_faults(path: str, expected: list[tuple[str, str]]) -> None:
    found = pointed_at(faults_of(path))
    assert len(found) == len(expected), found
    for (place, said), (place_start, said_start) in zip(found, expected, strict=True):
        assert place.startswith(place_start) and said.startswith(said_start), (place, said)


def test_a_list_and_a_range_make_a_grid_whose_last_axis_runs_fastest(write):
    path = write(
        sweep_of(
            "{key: problem.mass.ratio, values: [1, 4]}",
            "{key: problem.interaction.width, from: 0, to: 3, points: 4}",
        )
    )
    plan = load_sweep(path)
    assert plan.shape == (2, 4)
    assert [point.position for point in plan.points] == list(range(8))
    seen = [tuple(plan.values(point).values()) for point in plan.points]
    assert seen == [(ratio, width) for ratio in (1, 4) for width in (0.0, 1.0, 2.0, 3.0)]
    keys = plan.resolved(plan.points[6])
    assert keys["problem"]["mass"]["ratio"] == 4.0 and keys["problem"]["interaction"]["width"] == 2.0
    # The rest is the base's, with its defaults.
    assert keys["state"]["exponent"] == 3 and keys["sampling"]["walkers"] == 32


def test_a_point_is_the_single_run_with_the_same_keys(write):
    plan = load_sweep(write(sweep_of("{key: problem.mass.ratio, values: [7]}")))
    single = load_config(write(BASE.replace("ratio: 2.0", "ratio: 7")))
    assert plan.resolved(plan.points[0]) == resolved(single)
    assert plan.points[0] == point_of(single)


@pytest.mark.parametrize(
    ("ends", "spacing", "expected"),
    [
        ((1.0, 16.0, 5), "logarithmic", [1.0, 2.0, 4.0, 8.0, 16.0]),
        ((16.0, 1.0, 3), "logarithmic", [16.0, 4.0, 1.0]),
        ((0.0, 0.3, 4), "linear", [0.0, 0.1, 0.2, 0.3]),
        ((2.0, -2.0, 2), "linear", [2.0, -2.0]),
        ((math.pi, math.e, 2), "linear", [math.pi, math.e]),
    ],
)
def test_ranges_keep_their_ends_and_no_rounding(ends, spacing, expected):
    keys = {"key": "a", "from": ends[0], "to": ends[1], "points": ends[2], "spacing": spacing}
    assert list(range_values(RangeAxisConfig.model_validate(keys))) == expected


def test_keys_that_change_together_make_one_axis(write):
    plan = load_sweep(
        write(
            sweep_of(
                "{key: problem.level, values: [0, 1]}",
                "together: [{key: state.exponent, values: [3, 5]}, {key: state.electrons, from: 4, to: 3, points: 2}]",
            )
        )
    )
    assert plan.shape == (2, 2)
    assert [list(plan.values(point).values()) for point in plan.points] == [
        [0, 3, 4.0], [0, 5, 3.0], [1, 3, 4.0], [1, 5, 3.0]
    ]  # fmt: skip
    assert plan.resolved(plan.points[1])["state"]["electrons"] == 3


def test_values_from_the_columns_of_a_file(write):
    Path("strain.csv").write_text("# measured\nsample, mass ratio, kind\nA, 1.5, coulomb\n\nB, 3, coulomb\n")
    plan = load_sweep(
        write(sweep_of("{file: strain.csv, columns: {problem.mass.ratio: mass ratio, problem.interaction.kind: kind}}",
                       base=BASE.replace(", width: 1.0", "")))
    )  # fmt: skip
    assert plan.axes[0].spacing == "file"
    assert [plan.values(point) for point in plan.points] == [
        {"problem.mass.ratio": 1.5, "problem.interaction.kind": "coulomb"},
        {"problem.mass.ratio": 3, "problem.interaction.kind": "coulomb"},
    ]


def test_whole_groups_and_entries_of_lists_are_keys_too(write):
    interactions = "[{kind: coulomb}, {kind: sum, terms: [{weight: 1, interaction: {kind: coulomb}}]}]"
    plan = load_sweep(write(sweep_of(f"{{key: problem.interaction, values: {interactions}}}")))
    kinds = [plan.resolved(point)["problem"]["interaction"]["kind"] for point in plan.points]
    assert kinds == ["coulomb", "sum"]
    base = BASE.replace(
        "{kind: square_well, width: 1.0}", "{kind: sum, terms: [{weight: 1, interaction: {kind: coulomb}}]}"
    )
    plan = load_sweep(write(sweep_of("{key: 'problem.interaction.terms[0].weight', values: [1, 2]}", base=base)))
    assert plan.resolved(plan.points[1])["problem"]["interaction"]["terms"][0]["weight"] == 2.0
    base = BASE.replace("{kind: square_well, width: 1.0}", "{kind: pseudopotentials, values: {1: 1.0}}")
    plan = load_sweep(write(sweep_of("{key: problem.interaction.values.3, values: [0, 0.2]}", base=base)))
    assert plan.resolved(plan.points[1])["problem"]["interaction"]["values"] == {"1": 1.0, "3": 0.2}


def test_a_required_key_may_come_from_the_sweep_alone(write):
    base = BASE.replace("exponent: 3, ", "")
    plan = load_sweep(write(sweep_of("{key: state.exponent, values: [3, 5]}", base=base)))
    assert [plan.resolved(point)["state"]["exponent"] for point in plan.points] == [3, 5]


def test_the_field_changes_what_a_material_fills_in(write):
    base = BASE.replace("  mass: {ratio: 2.0}\n", "").replace("width: 1.0", "width_nm: 12") + "material: {name: AlAs}\n"
    plan = load_sweep(write(sweep_of("{key: material.field_tesla, values: [4, 16]}", base=base)))
    widths = [plan.resolved(point)["problem"]["interaction"]["width"] for point in plan.points]
    # l_B falls as the root of the field.
    assert widths[1] == pytest.approx(2.0 * widths[0])


@pytest.mark.parametrize(
    ("rule", "left"),
    [
        ("{problem.mass.ratio: 2}", 6),
        ("{problem.mass.ratio: 2, problem.level: 0}", 7),
        ("{problem.mass.ratio: {above: 2}}", 4),
        ("{problem.mass.ratio: {above: 1, below: 8}, problem.level: 1}", 6),
    ],
)
def test_points_are_left_out_where_all_of_a_rule_agrees(write, rule, left):
    ratio = "{key: problem.mass.ratio, from: 1, to: 8, points: 4, spacing: logarithmic}"
    axes = (ratio, "{key: problem.level, values: [0, 1]}")
    plan = load_sweep(write(sweep_of(*axes, exclude=rule)))
    assert plan.shape == (4, 2) and len(plan.points) == left
    assert len({point.position for point in plan.points}) == left


def test_points_that_differ_in_the_problem_share_a_liquid(write):
    path = write(
        sweep_of(
            "{key: sampling.seed, values: [1, 2]}",
            "{key: problem.mass.ratio, values: [1, 2, 3]}",
            "{key: problem.level, values: [0, 1]}",
        )
    )
    plan = load_sweep(path)
    assert [len(points) for points in plan.liquids.values()] == [6, 6]
    for liquid, points in plan.liquids.items():
        seeds = {plan.values(point)["sampling.seed"] for point in points}
        assert len(seeds) == 1, liquid
    # A family shares all but the mass.
    assert len({point.family for point in plan.points}) == 2
    assert len({point.name for point in plan.points}) == 12


@pytest.mark.parametrize(("quantity", "liquids"), [("energy", 2), ("stretch", 6)])
def test_a_run_that_ends_by_a_problem_s_error_is_that_problem_s(write, quantity, liquids):
    """The energy's error depends on the interaction, the stretch's on the mass too."""
    base = BASE.replace("sweeps: 480", f"sweeps: 480, target_error: 0.001, target_quantity: {quantity}")
    axes = ("{key: problem.mass.ratio, values: [1, 2, 3]}", "{key: problem.interaction.width, values: [0, 1]}")
    assert len(load_sweep(write(sweep_of(*axes, base=base))).liquids) == liquids
    assert len(load_sweep(write(sweep_of(*axes))).liquids) == 1


def test_a_liquid_of_the_catalogue_takes_part(write):
    base = BASE.replace("{kind: laughlin, exponent: 3, electrons: 4}", "{catalogue: laughlin-1/3}")
    base = base.replace("sampling: {seed: 5, sweeps: 480}\n", "")
    plan = load_sweep(write(sweep_of("{key: state.catalogue, values: [laughlin-1/3, laughlin-1/5]}", base=base)))
    assert [plan.resolved(point)["state"]["catalogue"] for point in plan.points] == ["laughlin-1/3", "laughlin-1/5"]
    assert len(plan.liquids) == 2


def test_names_do_not_depend_on_what_changes_no_number(write):
    axis, same = "{key: problem.mass.ratio, values: [%s]}", set()
    for value, base in (
        ("2", BASE),
        ("2.0", BASE.replace("sweeps: 480", "sweeps: 480, threads: 2, walkers: 32")),
        ("2", BASE + "scan: {stretch: {from: -1}}\n"),
    ):
        same.update(load_sweep(write(sweep_of(axis % value, base=base))).points)
    (point,) = same
    assert point.liquid == point_of(load_config(write(BASE))).liquid
    other = load_sweep(write(sweep_of(axis % "2", base=BASE.replace("480", "640")))).points[0]
    assert other.name != point.name and other.liquid != point.liquid


FAULTS = {
    "unknown key": (
        ["{key: problem.mas.ratio, values: [1]}"],
        [("key: problem.mas", "problem.mas: unknown key; allowed are mass, ")],
    ),
    "a value out of range": (
        ["{key: problem.mass.ratio, values: [1, -1, 2, x]}"],
        [
            ("-1, 2", "problem.mass.ratio: must be a finite number above 0, not -1 (at problem.mass.ratio -1)"),
            ("x]}", "problem.mass.ratio: must be a finite number above 0, not 'x' (at problem.mass.ratio 'x')"),
        ],
    ),
    "a group with a fault inside": (
        ["{key: problem.interaction, values: [{kind: coulomb}, {kind: yukawa, screning: 1}]}"],
        [
            ("{kind: yukawa", "problem.interaction.screening: missing; "),
            ("screning: 1", "problem.interaction.screning: unknown key; allowed are kind, screening"),
        ],
    ),
    "lengths that differ": (
        ["together: [{key: state.exponent, values: [3, 5]}, {key: state.electrons, values: [4]}]"],
        [("{key: state.electrons", "sweep.axes[0].together[1]: state.electrons has 1 value, but state.exponent, ")],
    ),
    "swept twice": (
        ["{key: problem.level, values: [0]}", "{key: problem.level, values: [1]}"],
        [("{key: problem.level, values: [1]}", "sweep.axes[1]: problem.level is swept twice")],
    ),
    "a group after its key": (
        ["{key: problem.mass.ratio, values: [2]}", "{key: problem.mass, values: [{ratio: 3}]}"],
        [("{key: problem.mass, ", "sweep.axes[1]: problem.mass holds problem.mass.ratio, an earlier axis; put that ")],
    ),
    "a sweep in a sweep": (
        ["{key: sweep.axes, values: [1]}"],
        [("sweep.axes", "sweep.axes[0].key: sweep.axes cannot take part: a sweep cannot hold another")],
    ),
    "threads": (
        ["{key: sampling.threads, values: [1, 2]}"],
        [("sampling.threads", "sweep.axes[0].key: sampling.threads cannot take part: no result depends on it")],
    ),
    "no values": (
        ["{key: problem.level, values: []}"],
        [("[]", "sweep.axes[0].values: must hold at least one entry")],
    ),
    "no form of an axis": (
        ["{key: problem.level}"],
        [
            ("{key: ", "sweep.axes[0].from: missing; must be a finite number, unless values or together or file "),
            ("{key: ", "sweep.axes[0].to: missing; "),
            ("{key: ", "sweep.axes[0].points: missing; must be a whole number from 2 to 1e+06, unless "),
        ],
    ),
    "logarithm of nothing": (
        ["{key: problem.mass.ratio, from: 0, to: 2, points: 3, spacing: logarithmic}"],
        [("logarithmic", "sweep.axes[0].spacing: logarithmic needs from and to above 0, not 0 and 2")],
    ),
    "no such file": (
        ["{file: none.csv, columns: {problem.level: level}}"],
        [("none.csv", "sweep.axes[0].file: none.csv: there is no such file")],
    ),
    "a file outside": (
        ["{file: ../none.csv, columns: {problem.level: level}}"],
        [("../none.csv", "sweep.axes[0].file: must be a path inside the folder of the configuration")],
    ),
    "too many points": (
        [f"{{key: problem.{key}, from: 1, to: 2, points: 5000}}" for key in ("mass.ratio", "interaction.width")],
        [("axes:", "sweep.axes: give 25000000 points; at most 1000000 work")],
    ),
    "no such entry of a list": (
        ["{key: 'problem.interaction.terms[3].weight', values: [1]}"],
        [("key: ", "problem.interaction.terms[3].weight: there is no such place in the configuration")],
    ),
    "what changes no optimum": (
        ["{key: scan.stretch.points, values: [11, 21]}"],
        [("scan.stretch", "sweep.axes[0].key: scan.stretch.points cannot take part: a sweep finds optima, which ")],
    ),
    "a value twice": (
        ["{key: problem.mass.ratio, values: [1, 2, 1.0]}"],
        [("1.0]", "sweep.axes[0].values[2]: holds problem.mass.ratio 1.0 twice; keep one")],
    ),
    "a pair twice": (
        ["together: [{key: state.exponent, values: [3, 3, 3]}, {key: state.electrons, values: [4, 5, 4]}]"],
        [("3]}, {key", "sweep.axes[0].together[0].values[2]: holds state.exponent 3, state.electrons 4 twice; ")],
    ),
    "no key": (
        ["{key: problem..level, values: [1]}"],
        [("problem..level", "sweep.axes[0].key: must be a key of the configuration, as problem.mass.ratio, not ")],
    ),
    "a key that breaks lines": (
        ["{key: p\u2028roblem.level, values: [1]}"],
        [("p", "sweep.axes[0].key: must be a key of the configuration, as problem.mass.ratio, not 'p\\u2028")],
    ),
}


@pytest.mark.parametrize(("axes", "expected"), FAULTS.values(), ids=FAULTS.keys())
def test_faults_name_their_place_in_the_file(write, axes, expected):
    check_faults(write(sweep_of(*axes)), expected)


COLUMN_FAULTS = {
    "no such column": ("a,b\n1,2\n", ("c}}", "sweep.axes[0].columns.problem.level: t.csv has no column")),
    "twice": ("c,c\n1,2\n", ("c}}", "sweep.axes[0].columns.problem.level: t.csv has more than one")),
    "no row": ("c\n", ("t.csv", "sweep.axes[0].file: t.csv: needs a line of headings and at least one row")),
    "ragged": ("c,d\n1\n", ("t.csv", "sweep.axes[0].file: t.csv: row 1 has 1 entries, the headings have 2")),
    "quotes": ('c\n"1\n', ("t.csv", "sweep.axes[0].file: t.csv: is no UTF-8 text of comma-separated values")),
    "a value of a row": ("c\n1\n9\n", ("problem.level: c", "problem.level: must be a whole number from 0 to 2, not 9")),
}


@pytest.mark.parametrize(("content", "expected"), COLUMN_FAULTS.values(), ids=COLUMN_FAULTS.keys())
def test_faults_of_a_file_of_values(write, content, expected):
    path = write(sweep_of("{file: t.csv, columns: {problem.level: c}}"))
    Path("t.csv").write_text(content)
    check_faults(path, [expected])


def test_a_fault_of_the_base_is_said_once_and_without_a_point(write):
    text = sweep_of("{key: problem.mass.ratio, values: [1, 2, 3]}", base=BASE.replace("sweeps", "swepes"))
    ((place, said),) = pointed_at(faults_of(write(text)))
    assert place.startswith("swepes") and said.startswith("sampling.swepes: unknown key") and "(at" not in said


def test_the_torus_road_is_not_for_sweeps(write):
    text = sweep_of("{key: problem.mass.ratio, values: [1, 2]}", base=f"{BASE}scan: {{road: torus}}\n")
    ((place, said),) = pointed_at(faults_of(write(text)))
    assert place == "torus}" and said.startswith("scan.road: must be plane in a sweep, not torus; ")


def test_a_fault_of_some_points_counts_them(write):
    axes = ("{key: problem.mass.ratio, values: [1, 2, 3]}", "{key: problem.level, values: [0, 7]}")
    ((place, said),) = pointed_at(faults_of(write(sweep_of(*axes))))
    assert place == "7]}" and said.startswith("problem.level: must be a whole number from 0 to 2, not 7")
    assert said.endswith("(at problem.mass.ratio 1, problem.level 7 and at 2 other points)")


def test_faults_are_listed_up_to_ten_and_counted(write):
    values = ", ".join(str(-value) for value in range(1, 41))
    faults = faults_of(write(sweep_of(f"{{key: problem.mass.ratio, values: [{values}]}}")))
    assert len(faults) == 11 and faults[-1] == "run.yaml: and 30 more faults"


@pytest.mark.parametrize(
    ("rule", "place", "said"),
    [
        ("{problem.level: 1}", "problem.level", "problem.level: is no swept key; they are problem.mass.ratio"),
        ("{problem.mass.ratio: 3}", "3}", "problem.mass.ratio: no value of problem.mass.ratio is 3; it takes [1, 2]"),
        ("{}", "{}", ": must name at least one swept key"),
        ("{problem.mass.ratio: {above: 0}}", "exclude:", "leaves no point"),
    ],
)
def test_faults_of_exclusions(write, rule, place, said):
    path = write(sweep_of("{key: problem.mass.ratio, values: [1, 2]}", exclude=rule))
    where = "" if place == "exclude:" else "[0]" if said.startswith(":") else "[0]."
    separator = ": " if place == "exclude:" else ""
    check_faults(path, [(place, f"sweep.exclude{where}{separator}{said}")])


def test_single_runs_refuse_a_sweep_and_sweeps_a_single_run(write):
    path = write(sweep_of("{key: problem.level, values: [0, 1]}"))
    assert has_sweep(path)
    with pytest.raises(ConfigError, match=r"run.yaml:6:1: sweep: makes many runs of this; use mcgeo sweep"):
        load_config(path)
    path = write(BASE)
    assert not has_sweep(path)
    assert faults_of(path) == ["run.yaml:1:1: has no key sweep; mcgeo sample and scan do a single run"]


def test_paths_of_keys():
    assert key_path("a.b[2][3].c") == ("a", "b", 2, 3, "c")
    for text in ("", "a.", "a[x]", "[1]", "a b]"):
        with pytest.raises(ValueError):
            key_path(text)
    tree = {"a": [{"b": 1}, {"b": 2}], "c": None}
    assert replaced(tree, ("a", 1, "b"), 5) == {"a": [{"b": 1}, {"b": 5}], "c": None}
    assert replaced(tree, ("c", "d", "e"), 5)["c"] == {"d": {"e": 5}}
    assert json.dumps(tree) == '{"a": [{"b": 1}, {"b": 2}], "c": null}'
    for path in (("a", 2, "b"), ("a", "b"), ("c", 0)):
        with pytest.raises(KeyError):
            replaced(tree, path, 5)


def test_expanding_a_sweep_loads_no_numerical_library():
    code = (
        "import sys, mcgeo.runs.sweep_plan; "
        "sys.exit(bool({'numpy', 'numba', 'scipy', 'matplotlib', 'h5py'} & set(sys.modules)))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
