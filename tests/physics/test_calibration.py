"""Error bars of many short runs: pulls against the truth are standard normal deviates.

Exact values: Laughlin 1/3 of six electrons on the hexagonal torus, by diagonalisation in second quantisation; the
droplet of six by rational expansion of its polynomial, both computed independently of this package.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from scripts.calibrate import CASES, Case, Found, judged, laughlin, normal_deviates, pulls, quantities, run

Array = NDArray[np.float64]

RUNS = 100
SHORT = {"walkers": 16, "sweeps": 320, "blocks": 8, "equilibration": 60}
SIX = (
    Case("torus", laughlin(3, 6), SHORT, exact={"energy of the cell": -0.4113987749}),
    Case("droplet", laughlin(3, 6), SHORT, disk=True, exact={"energy": -0.391516700953, "<r^2>": 17.0}),
)


@pytest.fixture(scope="module")
def found(tmp_path_factory: pytest.TempPathFactory) -> dict[str, dict[str, Array]]:
    folder: Path = tmp_path_factory.mktemp("calibration")
    return {case.name: pulls([quantities(run(case, seed, folder)) for seed in range(RUNS)], case.exact) for case in SIX}


def test_errors_are_calibrated(found: dict[str, dict[str, Array]]) -> None:
    for by_name in found.values():
        assert len(by_name) >= 10
        for name, z in by_name.items():
            assert judged(z).calibrated, f"{name}: {judged(z)}"


@pytest.mark.parametrize("factor", [1.3, 0.75])
def test_wrong_errors_are_seen(found: dict[str, dict[str, Array]], factor: float) -> None:
    # Waves of different length fluctuate by themselves, and so do the two liquids.
    by_name = {**found["torus"], **found["droplet"]}
    names = ["energy", "<r^2>", *(name for name in by_name if name.startswith("S(q)"))]
    together = np.concatenate([by_name[name] for name in names])
    assert judged(together).calibrated
    assert not judged(factor * together).calibrated
    # A bias of half an error too.
    assert not judged(together + 0.5).calibrated


def test_few_samples_are_taken_for_what_they_are() -> None:
    random = np.random.default_rng(12)
    x = random.standard_normal((400, 6))
    t = x.mean(axis=1) / x.std(axis=1, ddof=1) * np.sqrt(6.0)
    assert judged(normal_deviates(t, np.full(400, 5.0))).calibrated
    assert not judged(t).calibrated
    # The mean of all other runs as truth costs a factor n/(n - 1) of the variance.
    runs = [{"x": Found(row.mean(), row.std(ddof=1) / np.sqrt(6.0), 5)} for row in x[:12]]
    assert judged(pulls(runs, {})["x"]).calibrated
    assert not judged(np.append(t, np.nan)).calibrated


@pytest.mark.long
@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_every_liquid(case: Case, tmp_path: Path) -> None:
    by_name = pulls([quantities(run(case, seed, tmp_path)) for seed in range(20_000, 20_200)], case.exact)
    wrong = {name: judged(z) for name, z in by_name.items() if not judged(z).calibrated}
    assert not wrong
