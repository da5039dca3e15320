"""Promises that hold across the whole program: one signature per kernel, results that do not depend on threads."""

import importlib
import json
import pkgutil
import subprocess
import sys

import numba
import numpy as np
import pytest

import mcgeo.sampling
import mcgeo.states
from mcgeo.runs.config import load_config
from mcgeo.runs.sample import sample

SAMPLING = "sampling: {walkers: 24, sweeps: 16, equilibration: 20, blocks: 2, seed: 5, threads: %d, q_max: 5}\n"
DROPLETS = {
    "droplet": "state: {kind: laughlin, exponent: 3, electrons: 4}\ngeometry: {kind: disk}\n",
    "pfaffian_droplet": "state: {kind: moore_read, filling: 1/2, electrons: 4}\ngeometry: {kind: disk}\n",
}
LIQUIDS = {
    "laughlin": "state: {kind: laughlin, exponent: 3, electrons: 4, metric: {stretch: 0.6, angle_degrees: 20}}\n",
    "moore_read": "state: {kind: moore_read, filling: 1/2, electrons: 4}\n",
    "fermi_sea": "state: {kind: fermi_sea, filling: 1/2, electrons: 7}\n",
}
# Of every liquid, two sizes and two cells: all that may change an array's type comes through.
OTHER_LIQUIDS = [
    "state: {kind: laughlin, exponent: 2, electrons: 9}\ncell: {shape: square}\n",
    "state: {kind: moore_read, filling: 1, electrons: 6, sector: 2}\ncell: {tau: [0.2, 3.0]}\n",
    "state: {kind: fermi_sea, filling: 1/4, electrons: 13}\n",
]


def signatures():
    """Number of compiled signatures of the kernels that Python calls, those imported by states and measurements.

    Kernels called by kernels only may be compiled for several kinds of tables: they are part of their callers.
    """
    found = {}
    for floor in (mcgeo.states, mcgeo.sampling):
        for module in pkgutil.iter_modules(floor.__path__, f"{floor.__name__}."):
            for name, value in vars(importlib.import_module(module.name)).items():
                if isinstance(value, numba.core.registry.CPUDispatcher):
                    found[f"{value.py_func.__module__.rpartition('.')[2]}.{name}"] = len(value.signatures)
    return {name: count for name, count in found.items() if count}


def run_everything(folder):
    """Every liquid once, small; run in a process of its own, where no test has called a kernel before."""
    for number, text in enumerate([*LIQUIDS.values(), *OTHER_LIQUIDS]):
        path = folder / f"run{number}.yaml"
        path.write_text(text + SAMPLING % 2)
        liquid = sample(load_config(str(path)), folder / f"out{number}", quiet=True)
        for state in liquid.states:
            a, b = np.random.default_rng(1).uniform(-0.5, 0.5, (2, state.n_electrons, 8))
            state.log_weight(a, b)


def one_each(counts):
    assert counts
    assert {name: count for name, count in counts.items() if count != 1} == {}


PROGRAM = """
import json, sys
from pathlib import Path
import numpy as np
from mcgeo.kernels.pair_histogram import add_pair_counts
from tests.unit.test_floors import run_everything, signatures

run_everything(Path(sys.argv[1]))
print(json.dumps(signatures()))
fault = np.zeros((2, 8), dtype=np.float32)
add_pair_counts(fault, fault, 0.0, 1.0, 1.0, 0.1, np.zeros((2, 8), dtype=np.int64))
print(json.dumps(signatures()))
"""


def test_every_kernel_has_one_signature(tmp_path):
    done = subprocess.run([sys.executable, "-c", PROGRAM, str(tmp_path)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    counts, with_fault = (json.loads(line) for line in done.stdout.splitlines())
    one_each(counts)
    assert set(counts) >= {
        "laughlin_torus.advance", "laughlin_torus.refresh_phases", "laughlin_torus.log_weights",
        "structure.add_structure_factor", "pair_histogram.add_pair_counts",
    }  # fmt: skip
    assert {name.partition(".")[0] for name in counts} >= {"moore_read_torus", "fermi_sea_moves"}
    with pytest.raises(AssertionError):
        one_each(with_fault)


@pytest.mark.parametrize("kind", [*LIQUIDS, *DROPLETS])
def test_threads_do_not_change_a_bit(kind, tmp_path):
    liquids = []
    for threads in (1, 2, 3):
        path = tmp_path / f"run{threads}.yaml"
        path.write_text({**LIQUIDS, **DROPLETS}[kind] + SAMPLING % threads)
        liquids.append(sample(load_config(str(path)), tmp_path / f"out{threads}", quiet=True))
    first = liquids[0]
    assert first.blocks.trace.std() > 0.0
    assert len(first.chains[0].walkers.a) == 3
    for other in liquids[1:]:
        for name, values in {**first.blocks.means, **first.blocks.counts}.items():
            np.testing.assert_array_equal({**other.blocks.means, **other.blocks.counts}[name], values)
        np.testing.assert_array_equal(other.blocks.trace, first.blocks.trace)
        np.testing.assert_array_equal(other.blocks.accepted, first.blocks.accepted)
        for mine, others in zip(first.chains, other.chains, strict=True):
            assert mine.step == others.step
            for array in ("a", "b", "words"):
                np.testing.assert_array_equal(getattr(others.walkers, array), getattr(mine.walkers, array))


def test_another_seed_changes_everything(tmp_path):
    liquids = []
    for seed in (5, 6):
        path = tmp_path / f"seed{seed}.yaml"
        path.write_text(LIQUIDS["laughlin"] + (SAMPLING % 1).replace("seed: 5", f"seed: {seed}"))
        liquids.append(sample(load_config(str(path)), tmp_path / f"out{seed}", quiet=True))
    assert not np.any(liquids[0].blocks.means["structure"] == liquids[1].blocks.means["structure"])
