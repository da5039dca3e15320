"""Faults of all groups but the state, alone and together, each with its place and what is allowed."""

import pytest

from mcgeo.errors import ConfigError
from mcgeo.runs.config import config_from_resolved, load_config

LAUGHLIN = "state: {kind: laughlin, exponent: 3, electrons: 10}\n"


def faults(path: str) -> list[str]:
    with pytest.raises(ConfigError) as caught:
        load_config(path)
    return caught.value.faults


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        # Where the particles live.
        (
            LAUGHLIN + "cell: {§shape: square, tau: [0, 1]}\n",
            "cell.shape: does not go with tau; remove one of them",
        ),
        (
            LAUGHLIN + "§cell: {}\n",
            "cell.shape: missing; must be one of hexagonal, square, unless tau is given instead",
        ),
        (LAUGHLIN + "cell: §square\n", "cell: must be a group of keys with shape or tau, not 'square'"),
        (
            LAUGHLIN + "cell: {shape: §hexagon}\n",
            "cell.shape: must be one of hexagonal, square, not 'hexagon' (did you mean 'hexagonal'?)",
        ),
        (LAUGHLIN + "cell: {tau: [0, §0]}\n", "cell.tau[1]: must be a finite number above 0, not 0"),
        (LAUGHLIN + "cell: {tau: §[0]}\n", "cell.tau: must be a list of 2 numbers, not [0]"),
        (LAUGHLIN + "cell: {tau: §1}\n", "cell.tau: must be a list of 2 numbers, not 1"),
        (
            LAUGHLIN + "geometry: {kind: §sphere}\n",
            "geometry.kind: must be one of torus, disk, not 'sphere'",
        ),
        (
            LAUGHLIN + "geometry: {kind: disk}\n§cell: {shape: square}\n",
            "cell: a disk has no cell; remove it, or use the geometry torus",
        ),
        (
            "state: {kind: §fermi_sea, filling: 1/2, electrons: 7}\ngeometry: {kind: disk}\n",
            "state.kind: must be laughlin or moore_read on a disk, not fermi_sea",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, conjugate: §true}\ngeometry: {kind: disk}\n",
            "state.conjugate: must be false on a disk; the conjugate needs the torus",
        ),
        (
            "state: {kind: moore_read, filling: 1/2, electrons: 10, §sector: all}\ngeometry: {kind: disk}\n",
            "state.sector: a disk has no sectors; remove it",
        ),
        # Sampling.
        (
            LAUGHLIN + "sampling: {walkers: §0}\n",
            "sampling.walkers: must be a whole number of at least 1, not 0",
        ),
        (
            LAUGHLIN + "sampling: {walkers:§ }\n",
            "sampling.walkers: must be a whole number of at least 1, not null",
        ),
        (LAUGHLIN + "sampling: §[1]\n", "sampling: must be a group of keys (walkers, "),
        (
            LAUGHLIN + "sampling: {equilibration: §-1}\n",
            "sampling.equilibration: must be a whole number of at least 0",
        ),
        (
            LAUGHLIN + "sampling: {blocks: §1}\n",
            "sampling.blocks: must be a whole number of at least 2, not 1",
        ),
        (
            LAUGHLIN + "§sampling: {sweeps: 10}\n",
            "sampling.blocks: must not exceed sweeps, which is 10, but is 16",
        ),
        (
            LAUGHLIN + "sampling: {sweeps: 100, blocks: 10, measure_every: §11}\n",
            "sampling.measure_every: must be at most sweeps/blocks = 10, so that every block holds a "
            "measurement, not 11",
        ),
        (
            LAUGHLIN + "sampling: {measure_every: §0}\n",
            "sampling.measure_every: must be a whole number of at least 1, or null, not 0",
        ),
        (
            LAUGHLIN + "sampling: {step: §0.0}\n",
            "sampling.step: must be a finite number above 0, or null, not 0.0",
        ),
        (
            LAUGHLIN + "sampling: {step: §.inf}\n",
            "sampling.step: must be a finite number above 0, or null, not .inf",
        ),
        (
            LAUGHLIN + "sampling: {step: §true}\n",
            "sampling.step: must be a finite number above 0, or null, not true",
        ),
        (
            LAUGHLIN + "sampling: {seed: §-1}\n",
            "sampling.seed: must be a whole number of at least 0, or null",
        ),
        (
            LAUGHLIN + "sampling: {threads: §0}\n",
            "sampling.threads: must be a whole number of at least 1, or null",
        ),
        (
            LAUGHLIN + "sampling: {q_max: §3}\n",
            "sampling.q_max: must be a finite number from 4 to 12, not 3",
        ),
        # Problem.
        (
            LAUGHLIN + "problem: {mass: {ratio: §0}}\n",
            "problem.mass.ratio: must be a finite number above 0, not 0",
        ),
        (
            LAUGHLIN + "problem: {§mass: {}}\n",
            "problem.mass.ratio: missing; must be a finite number above 0, unless along_axes or "
            "tensor is given instead",
        ),
        (
            LAUGHLIN + "problem: {mass: §2}\n",
            "problem.mass: must be a group of keys with ratio or along_axes or tensor",
        ),
        (
            LAUGHLIN + "problem: {mass: {along_axes: [0.2, §-1]}}\n",
            "problem.mass.along_axes[1]: must be a finite number above 0, not -1",
        ),
        (
            LAUGHLIN + "problem: {mass: {§ratio: 2, along_axes: [1, 2]}}\n",
            "problem.mass.ratio: does not go with along_axes; remove one of them",
        ),
        (
            LAUGHLIN + "problem: {mass: {tensor: [[1, 0], [0, 1]], §angle_degrees: 3}}\n",
            "problem.mass.angle_degrees: does not go with tensor; remove one of them",
        ),
        (
            LAUGHLIN + "problem: {mass: {tensor: §[[1, 0.1], [0, 1]]}}\n",
            "problem.mass.tensor: must be symmetric, [[xx, xy], [xy, yy]], but the entries beside "
            "the diagonal are 0.1 and 0.0",
        ),
        (
            LAUGHLIN + "problem: {mass: {tensor: §[[1, 2], [2, 1]]}}\n",
            "problem.mass.tensor: must be positive definite: xx > 0, yy > 0 and xx yy > xy^2, not "
            "[[1.0, 2.0], [2.0, 1.0]]",
        ),
        (
            LAUGHLIN + "problem: {mass: {tensor: §[[0, 0], [0, 0]]}}\n",
            "problem.mass.tensor: must be positive definite",
        ),
        (
            LAUGHLIN + "problem: {mass: {tensor: [§1, [2, 3]]}}\n",
            "problem.mass.tensor[0]: must be a list of 2 numbers, not 1",
        ),
        (
            LAUGHLIN + "problem: {mass: {tensor: §1}}\n",
            "problem.mass.tensor: must be a list of 2 lists of 2 numbers, not 1",
        ),
        (
            LAUGHLIN + "problem: {interaction: {kind: §gauss}}\n",
            "problem.interaction.kind: must be one of coulomb, dipole, fang_howard, gaussian, gaussian_well, one_gate, "
            "power_law, pseudopotentials, softened, square_well, sum, table, two_gates, yukawa, not 'gauss' (did you "
            "mean 'gaussian'?)",
        ),
        (
            LAUGHLIN + "problem: {§interaction: {kind: gaussian}}\n",
            "problem.interaction.range: missing; must be a finite number above 0",
        ),
        (LAUGHLIN + "problem: {level: §3}\n", "problem.level: must be a whole number from 0 to 2, not 3"),
        (
            LAUGHLIN + "problem: {level: §true}\n",
            "problem.level: must be a whole number from 0 to 2, not true",
        ),
        # Scan.
        (
            LAUGHLIN + "scan: {stretch: {from: 1, to: §1}}\n",
            "scan.stretch.to: must be above from, which is 1, but is 1",
        ),
        (
            LAUGHLIN + "scan: {§stretch: {from: 3}}\n",
            "scan.stretch.to: must be above from, which is 3, but is 2",
        ),
        (
            LAUGHLIN + "scan: {stretch: {to: §7}}\n",
            "scan.stretch.to: must be a finite number from -6 to 6, not 7",
        ),
        (
            LAUGHLIN + "scan: {stretch: {§from_: 1}}\n",
            "scan.stretch.from_: unknown key; allowed are from, to, points",
        ),
        (
            LAUGHLIN + "scan: {stretch: {points: §2}}\n",
            "scan.stretch.points: must be a whole number from 3 to 10000",
        ),
        # The file.
        (
            LAUGHLIN + "§samplign: {}\n",
            "samplign: unknown key; allowed are state, geometry, cell, sampling, material,",
        ),
        (
            LAUGHLIN + "§state: {kind: laughlin, exponent: 3, electrons: 10}\n",
            "state: given twice, first on line 1 and again on line 2; keep one",
        ),
        (LAUGHLIN + '§"a\\nb": 1\n', "'a\\nb': unknown key"),
    ],
)
def test_each_fault_has_its_place_and_its_remedy(write, text, expected):
    """The sign § stands where the fault must be found and is no part of the file."""
    before, after = text.split("§")
    line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
    (fault,) = faults(write(before + after))
    assert fault.startswith(f"run.yaml:{line}:{column}: {expected}")


def test_every_fault_is_listed_at_once_in_the_order_of_the_file(write):
    text = """\
state:
  kind: moore_read
  filling: 1/3
  electrons: 7
  sector: 1
  electrons: 8
geometry: {kind: disk}
cell: {shape: round, tau: [1, -1]}
sampling:
  walkers: "8"
  sweeps: !!int 5
  steps: 3
problem: {mass: {ratio: -1}, levle: 1}
"""
    assert [fault.split(": ")[:2] for fault in faults(write(text))] == [
        ["run.yaml:3:12", "state.filling"],
        ["run.yaml:4:14", "state.electrons"],
        ["run.yaml:5:3", "state.sector"],
        ["run.yaml:6:3", "state.electrons"],
        ["run.yaml:8:1", "cell"],
        ["run.yaml:8:8", "cell.shape"],
        ["run.yaml:8:31", "cell.tau[1]"],
        ["run.yaml:9:1", "sampling.blocks"],
        ["run.yaml:10:12", "sampling.walkers"],
        ["run.yaml:11:11", "tags are not allowed ('!!int'); remove it"],
        ["run.yaml:12:3", "sampling.steps"],
        ["run.yaml:13:25", "problem.mass.ratio"],
        ["run.yaml:13:30", "problem.levle"],
    ]


def test_long_values_are_cut_in_messages(write):
    (fault,) = faults(write(LAUGHLIN + f"sampling: {{walkers: {list(range(500))}}}\n"))
    assert fault.endswith(" ...")
    assert len(fault) < 150


@pytest.mark.parametrize(
    ("data", "expected"),
    [
        (
            None,
            [
                "configuration: must be a group of keys (state, geometry, cell, sampling, material, problem, scan, "
                "sweep), not null"
            ],
        ),
        (
            {"state": {"kind": "laughlin", "exponent": 3, "electrons": 1}, 5: 1},
            [
                "state.electrons: must be a whole number from 2 to 10000, not 1",
                "5: unknown key; allowed are state, ",
            ],
        ),
        (
            {"state": {"kind": "fermi_sea", "filling": "1/2", "electrons": 7}, "geometry": {"kind": "disk"}},
            ["state.kind: must be laughlin or moore_read on a disk, not fermi_sea"],
        ),
    ],
)
def test_faults_of_resolved_data_have_no_place(data, expected):
    with pytest.raises(ConfigError) as caught:
        config_from_resolved(data)
    assert len(caught.value.faults) == len(expected)
    assert all(fault.startswith(start) for fault, start in zip(caught.value.faults, expected, strict=True))
