"""A finished run made longer is the run that was asked for that length from the start."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.cli.conftest import SMALL, Answer, contents, interrupted_after

Command = Callable[..., Answer]

RESULTS = Path("run_results/liquid.h5")
# Blocks of 60 sweeps; 480 in all.
LIQUIDS = {
    "laughlin": SMALL,
    "all_sectors": SMALL.replace("kind: laughlin", "kind: moore_read").replace("exponent: 3", "filling: 1/2"),
    "droplet": SMALL + "geometry: {kind: disk}\n",
    # Rounded up to whole measurements: blocks of 58 asked for, 60 made.
    "rounded": SMALL.replace("sweeps: 480", "sweeps: 460"),
}


@pytest.mark.parametrize("liquid", LIQUIDS)
def test_extended_run_is_the_longer_run(mcgeo: Command, small: Path, liquid: str) -> None:
    text = LIQUIDS[liquid]
    small.write_text(text)
    mcgeo("sample", "run.yaml")
    # 130 sweeps are three blocks of 60.
    answer = mcgeo("sample", "run.yaml", "--extend", "130", "--json")
    assert answer.code in (0, 3) and "block 11/11" in answer.err and "equilibrating" not in answer.err
    sweeps = "sweeps: 460" if liquid == "rounded" else "sweeps: 480"
    Path("long.yaml").write_text(text.replace(sweeps, "sweeps: 660").replace("blocks: 8", "blocks: 11"))
    other = mcgeo("sample", "long.yaml", "--json")
    assert contents(RESULTS) == contents(Path("long_results/liquid.h5"))
    one, two = json.loads(answer.out), json.loads(other.out)
    for found in (one, two):
        del found["seconds"], found["moves_per_second"]
    assert one == two
    assert sorted(path.name for path in RESULTS.parent.iterdir()) == ["liquid.h5", "sample.json"]


def test_first_configuration_reads_the_longer_file(mcgeo: Command, small: Path) -> None:
    mcgeo("sample", "run.yaml")
    longer = json.loads(mcgeo("sample", "run.yaml", "--extend", "60", "--json").out)
    kept = RESULTS.read_bytes()
    answer = mcgeo("sample", "run.yaml", "--json")
    assert "holds this liquid already, longer: 9 blocks where 8 are asked for" in answer.err
    assert json.loads(answer.out) == longer and RESULTS.read_bytes() == kept
    assert mcgeo("scan", "run.yaml").code == 0 and RESULTS.read_bytes() == kept


def test_longer_configuration_with_the_same_blocks_goes_on(mcgeo: Command, small: Path) -> None:
    mcgeo("sample", "run.yaml")
    small.write_text(SMALL.replace("sweeps: 480", "sweeps: 600").replace("blocks: 8", "blocks: 10"))
    answer = mcgeo("sample", "run.yaml")
    assert answer.code == 0 and "block 10/10" in answer.err and "equilibrating" not in answer.err
    mcgeo("sample", "run.yaml", "--out", "whole")
    assert contents(RESULTS) == contents(Path("whole/liquid.h5"))


@pytest.mark.parametrize("stop_after", [0, 1, 2])
def test_interrupted_extension_goes_on(
    mcgeo: Command, small: Path, monkeypatch: pytest.MonkeyPatch, stop_after: int
) -> None:
    mcgeo("sample", "run.yaml")
    short = contents(RESULTS)
    with monkeypatch.context() as patch:
        interrupted_after(patch, stop_after)
        stopped = mcgeo("sample", "run.yaml", "--extend", "180")
    assert stopped.code == 130 and f"{8 + stop_after} whole blocks are in" in stopped.err
    assert "without --extend" in stopped.err
    # What was there before is still there.
    held = contents(RESULTS)
    for name in ("blocks/means/structure", "blocks/trace", "blocks/counts/pairs"):
        first = short[name]
        assert held[name][: len(first)] == first
    again = mcgeo("sample", "run.yaml", "--extend", "180")
    assert again.code == 2 and f"{8 + stop_after} of 11 blocks" in again.err and "without --extend" in again.err
    assert contents(RESULTS) == held
    assert "block 11/11" in mcgeo("sample", "run.yaml").err
    Path("long.yaml").write_text(SMALL.replace("sweeps: 480", "sweeps: 660").replace("blocks: 8", "blocks: 11"))
    mcgeo("sample", "long.yaml")
    assert contents(RESULTS) == contents(Path("long_results/liquid.h5"))


def test_nothing_to_extend(mcgeo: Command, small: Path) -> None:
    answer = mcgeo("sample", "run.yaml", "--extend", "60")
    assert answer.code == 2 and "nothing to extend" in answer.err
    assert len(answer.err.splitlines()) == 1 and not RESULTS.parent.exists()
    assert mcgeo("sample", "run.yaml", "--extend", "0").code == 2
    both = mcgeo("sample", "run.yaml", "--extend", "60", "--overwrite")
    assert both.code == 2 and "--overwrite" in both.err


def test_other_blocks_are_refused(mcgeo: Command, small: Path) -> None:
    mcgeo("sample", "run.yaml")
    kept = RESULTS.read_bytes()
    small.write_text(SMALL.replace("sweeps: 480", "sweeps: 960"))
    for options in ((), ("--extend", "60")):
        answer = mcgeo("sample", "run.yaml", *options)
        assert answer.code == 2 and "sampling.sweeps: 480 and 960" in answer.err and "use --extend" in answer.err
    small.write_text(SMALL.replace("seed: 5", "seed: 6"))
    other = mcgeo("sample", "run.yaml", "--extend", "60")
    assert other.code == 2 and "sampling.seed: 5 and 6" in other.err and "use --extend" not in other.err
    assert RESULTS.read_bytes() == kept


def test_seed_left_open_and_the_file_itself_as_configuration(mcgeo: Command, small: Path) -> None:
    small.write_text(SMALL.replace("seed: 5", "seed: null"))
    mcgeo("sample", "run.yaml")
    answer = mcgeo("sample", str(RESULTS), "--extend", "1", "--json")
    seed = json.loads(answer.out)["seed"]
    longer = SMALL.replace("sweeps: 480", "sweeps: 540").replace("blocks: 8", "blocks: 9")
    Path("long.yaml").write_text(longer.replace("seed: 5", f"seed: {seed}"))
    mcgeo("sample", "long.yaml")
    assert contents(RESULTS) == contents(Path("long_results/liquid.h5"))
