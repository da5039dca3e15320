"""Registers of 512, 256 and 128 bits make the same chain: the lanes of a walker do not depend on their width."""

import json
import os
import subprocess
import sys

import pytest

PROGRAM = """
import json, numpy as np
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.sampling.walkers import groups_of, start_walkers
from mcgeo.states.laughlin import Laughlin
state = Laughlin(3, 6, TorusFrame.of(Cell.from_shape("hexagonal", 18)))
group = groups_of(state, start_walkers(state, 8, seed=5))[0]
group.advance(5.0, 20)
print(json.dumps({"accepted": group.accepted[0].tolist(), "a": np.sort(group.a, axis=0).tolist()}))
"""


def chain(tmp_path, **environment):
    kept = {key: value for key, value in os.environ.items() if not key.startswith("NUMBA_")}
    done = subprocess.run(
        [sys.executable, "-c", PROGRAM],
        env={**kept, "NUMBA_CACHE_DIR": str(tmp_path), **environment},
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    return json.loads(done.stdout)


@pytest.mark.long
@pytest.mark.parametrize("processor", ["haswell", "x86-64"])
def test_other_processors_make_the_same_chain(tmp_path, processor):
    here = chain(tmp_path)
    there = chain(tmp_path, NUMBA_CPU_NAME=processor, NUMBA_CPU_FEATURES="+avx2,+fma" if processor == "haswell" else "")
    assert there["accepted"] == here["accepted"]
    for column, other in zip(here["a"], there["a"], strict=True):
        assert column == pytest.approx(other, abs=1e-9)
