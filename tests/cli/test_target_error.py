"""Runs that go on until a statistical error is small enough."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from mcgeo.runs.ending import Ending, Target
from mcgeo.runs.sampled import Blocks, Sampled
from mcgeo.runs.storage import read_result
from tests.cli.conftest import SMALL, Answer, contents, interrupted_after

Command = Callable[..., Answer]

RESULTS = Path("run_results/liquid.h5")
# Blocks of 60 sweeps, from eight on.
OPEN = SMALL.replace("sweeps: 480", "sweeps: 480\n  target_error: ")


def first_blocks(result: Sampled, n_blocks: int) -> Sampled:
    """The same run when it had so many blocks."""
    b = result.blocks
    means = {name: mean[:n_blocks] for name, mean in b.means.items()}
    counts = {name: count[:n_blocks] for name, count in b.counts.items()}
    by_component = [np.ascontiguousarray(x[:, :n_blocks]) for x in (b.trace, b.accepted, b.drift)]
    return replace(result, blocks=Blocks(means, counts, *by_component))


def looks(n_blocks: int) -> list[int]:
    """Counts of blocks at which a run of eight or more is looked at, up to ``n_blocks``."""
    counts = [8]
    while counts[-1] < n_blocks:
        counts.append(counts[-1] + -(-counts[-1] // 10))
    return counts


STRETCH = OPEN.replace("target_error: ", "target_error: 2.5e-4\n  target_quantity: stretch")
DISK = "geometry: {kind: disk}\n"
LIQUIDS = {
    "energy": SMALL,
    "stretch": SMALL,
    "conjugate": SMALL.replace("ns: 4", "ns: 4\n  conjugate: true"),
    "droplet": SMALL + DISK,
    "droplet_stretch": SMALL + DISK,
    "all_sectors": SMALL.replace("kind: laughlin", "kind: moore_read").replace("exponent: 3", "filling: 1/2"),
}


def given_target(mcgeo: Command, small: Path, name: str, factor: float = 0.8) -> str:
    """Write a configuration whose target is this part of the error at eight blocks; its text."""
    small.write_text(LIQUIDS[name])
    mcgeo("sample", "run.yaml", "--out", "eight")
    quantity = "stretch" if name.endswith("stretch") else "energy"
    wanted = factor * read_result(Path("eight/liquid.h5")).statistical_error(quantity)
    keys = f"sweeps: 480\n  target_error: {wanted!r}\n  target_quantity: {quantity}"
    small.write_text(LIQUIDS[name].replace("sweeps: 480", keys))
    return small.read_text()


@pytest.mark.parametrize("target", LIQUIDS)
def test_ends_at_the_first_look_at_which_the_error_is_small_enough(mcgeo: Command, small: Path, target: str) -> None:
    given_target(mcgeo, small, target)
    answer = mcgeo("sample", "run.yaml", "--json")
    found = json.loads(answer.out)["diagnostics"]["target"]
    assert answer.code == 0 and found["reached"]
    assert " known to " in answer.err
    result = read_result(RESULTS)
    n_blocks = result.n_blocks
    assert n_blocks == looks(n_blocks)[-1] > 8
    assert found["sweeps"] == 60 * n_blocks
    errors = [first_blocks(result, count).statistical_error(found["quantity"]) for count in looks(n_blocks)]
    assert [error <= found["wanted"] for error in errors] == [False] * (len(errors) - 1) + [True]
    assert errors[-1] == found["error"]
    # Nothing but its length sets it apart from a run of as many blocks.
    fixed = SMALL.replace("sweeps: 480", f"sweeps: {60 * n_blocks}").replace("blocks: 8", f"blocks: {n_blocks}")
    Path("fixed.yaml").write_text(fixed + LIQUIDS[target].partition("points: 6}\n")[2])
    if target in ("energy", "droplet", "stretch"):
        mcgeo("sample", "fixed.yaml")
        open_end, fixed_end = contents(RESULTS), contents(Path("fixed_results/liquid.h5"))
        assert {name for name in open_end if open_end[name] != fixed_end[name]} == {"config"}


def run_in_pieces(mcgeo: Command, monkeypatch: pytest.MonkeyPatch, pieces: list[int], folder: str) -> None:
    for n_blocks in pieces:
        with monkeypatch.context() as patch:
            interrupted_after(patch, n_blocks)
            assert mcgeo("sample", "run.yaml", "--out", folder).code == 130
    assert mcgeo("sample", "run.yaml", "--out", folder).code == 0


# Inside a stretch between two looks, on a look, just before and after one, and block by block.
PIECES = [[3, 4], [8], [9, 1], [1] * 9, [10]]


@pytest.mark.parametrize(("target", "all_pieces"), [("droplet", PIECES), ("stretch", PIECES[1:2])])
def test_interrupted_run_ends_where_it_would_have_ended(
    mcgeo: Command, small: Path, monkeypatch: pytest.MonkeyPatch, target: str, all_pieces: list[list[int]]
) -> None:
    given_target(mcgeo, small, target, 0.5)
    mcgeo("sample", "run.yaml")
    assert read_result(RESULTS).n_blocks > max(sum(pieces) for pieces in all_pieces)
    for number, pieces in enumerate(all_pieces):
        run_in_pieces(mcgeo, monkeypatch, pieces, f"pieces_{number}")
        assert contents(Path(f"pieces_{number}/liquid.h5")) == contents(RESULTS)


def test_looks_that_depend_on_the_interruption_are_noticed(
    mcgeo: Command, small: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The same comparison fails for a run that is looked at wherever it happens to go on."""
    small.write_text(SMALL.replace("sweeps: 480", "sweeps: 2400").replace("blocks: 8", "blocks: 40") + DISK)
    mcgeo("sample", "run.yaml", "--out", "forty")
    errors = [first_blocks(read_result(Path("forty/liquid.h5")), count).energy.error for count in range(8, 41)]
    # A count that is none of the looks, and at which the error is smaller than at all before.
    early = next(n for n in range(12, 40) if n not in looks(n) and errors[n - 8] < min(errors[: n - 8]))
    wanted = errors[early - 8]
    small.write_text(OPEN.replace("target_error: ", f"target_error: {wanted!r}") + DISK)
    mcgeo("sample", "run.yaml")
    run_in_pieces(mcgeo, monkeypatch, [early], "pieces")
    assert contents(Path("pieces/liquid.h5")) == contents(RESULTS)
    monkeypatch.setattr(Ending, "is_look", lambda self, n_blocks: n_blocks > 8)
    run_in_pieces(mcgeo, monkeypatch, [early], "pieces_of_another")
    assert contents(Path("pieces_of_another/liquid.h5")) != contents(RESULTS)


def test_target_out_of_reach(mcgeo: Command, small: Path) -> None:
    small.write_text(OPEN.replace("target_error: ", "target_error: 1e-5\n  most_sweeps: 1000"))
    answer = mcgeo("sample", "run.yaml", "--json")
    assert answer.code == 3
    health = json.loads(answer.out)["diagnostics"]
    target = health["target"]
    # Whole blocks within the limit.
    assert target["sweeps"] == 960 and not target["reached"] and health["verdict"] == "short"
    assert target["sweeps_needed"] == pytest.approx(960 * (target["error"] / 1e-5) ** 2)
    text = mcgeo("sample", "run.yaml")
    assert text.code == 3 and "holds this liquid already" in text.err
    assert "not reached: error of the energy" in text.out and "--extend " in text.out
    assert f"about {target['sweeps_needed']:.2g} sweeps would do" in text.out
    # The limit may be raised, and the target loosened, for the run that is there.
    kept = RESULTS.read_bytes()
    small.write_text(OPEN.replace("target_error: ", "target_error: 1e-2"))
    assert mcgeo("sample", "run.yaml").code == 0 and RESULTS.read_bytes() == kept
    small.write_text(OPEN.replace("target_error: ", "target_error: 1e-5\n  most_sweeps: 1260"))
    more = mcgeo("sample", "run.yaml", "--json")
    assert more.code == 3 and json.loads(more.out)["diagnostics"]["target"]["sweeps"] == 1260
    mcgeo("sample", "run.yaml", "--out", "whole")
    assert contents(RESULTS) == contents(Path("whole/liquid.h5"))


def test_finished_run_is_given_a_target_and_the_other_way_round(mcgeo: Command, small: Path) -> None:
    mcgeo("sample", "run.yaml")
    Path("open.yaml").write_text(given_target(mcgeo, small, "energy"))
    small.write_text(SMALL)
    answer = mcgeo("sample", "open.yaml", "--out", "run_results")
    assert answer.code == 0 and "equilibrating" not in answer.err
    mcgeo("sample", "open.yaml", "--out", "whole")
    assert contents(RESULTS) == contents(Path("whole/liquid.h5"))
    kept = RESULTS.read_bytes()
    back = mcgeo("sample", "run.yaml", "--json")
    assert "longer: " in back.err and "target" not in json.loads(back.out)["diagnostics"]
    assert RESULTS.read_bytes() == kept
    # Extended, it has a length again, and still satisfies the target.
    assert mcgeo("sample", "open.yaml", "--out", "run_results", "--extend", "60").code == 0
    sampling = read_result(RESULTS).resolved["sampling"]
    assert sampling["target_error"] is None and sampling["most_sweeps"] is None
    assert sampling["sweeps"] == 60 * sampling["blocks"]
    again = mcgeo("sample", "open.yaml", "--out", "run_results", "--json")
    assert again.code == 0 and json.loads(again.out)["diagnostics"]["target"]["sweeps"] == sampling["sweeps"]


def test_another_problem_may_need_more(mcgeo: Command, small: Path) -> None:
    text = given_target(mcgeo, small, "stretch", 1.02)
    mcgeo("sample", "run.yaml")
    n_blocks = read_result(RESULTS).n_blocks
    small.write_text(text.replace("ratio: 2.0", "ratio: 3.0"))
    answer = mcgeo("scan", "run.yaml", "--json")
    assert answer.code == 0
    found = json.loads(answer.out)
    target = found["diagnostics"]["target"]
    assert found["optimum"]["stretch_error"] == target["error"] <= target["wanted"]
    assert read_result(RESULTS).n_blocks > n_blocks


def test_problem_without_answer_is_refused_before_sampling(mcgeo: Command, small: Path) -> None:
    interaction = "  interaction: {kind: pseudopotentials, values: {1: 1.0}}\n"
    small.write_text((STRETCH + DISK).replace("scan:", f"{interaction}scan:"))
    answer = mcgeo("sample", "run.yaml")
    assert answer.code == 2 and "problem.interaction" in answer.err
    small.write_text(STRETCH.replace("ratio: 2.0", "ratio: 20000.0"))
    answer = mcgeo("sample", "run.yaml")
    assert answer.code == 2 and "problem.mass" in answer.err
    assert not RESULTS.parent.exists()


def test_plan_says_that_the_length_is_open_and_what_the_limit_costs(mcgeo: Command, small: Path) -> None:
    small.write_text(STRETCH)
    plan = json.loads(mcgeo("check", "run.yaml", "--json").out)
    assert plan["length"].startswith("open, until the error of the stretch is 0.00025, at least 8 blocks")
    assert plan["sweeps_per_walker"] == 32 * 480 and plan["blocks"] == 256
    small.write_text(SMALL.replace("480", f"{32 * 480}").replace("blocks: 8", "blocks: 256"))
    fixed = json.loads(mcgeo("check", "run.yaml", "--json").out)
    assert fixed == {key: value for key, value in plan.items() if key != "length"}


FAULTS = {
    "target_quantity: stretch": ("7:20", "sampling.target_quantity", "goes with target_error only"),
    "most_sweeps: 960": ("7:16", "sampling.most_sweeps", "goes with target_error only"),
    "target_error: 0": ("7:17", "sampling.target_error", "must be a finite number above 0"),
    "target_error: {energy: 1}": ("7:17", "sampling.target_error", "must be a finite number above 0"),
    "target_error: 1e-3\n  most_sweeps: 479": ("8:16", "sampling.most_sweeps", "must be at least sweeps, which is 480"),
    "target_error: 1e-3\n  most_sweeps: 1e6": ("8:16", "sampling.most_sweeps", "must be at most 1024 blocks"),
    "target_error: 1e-3\n  target_quantity: gain": ("8:20", "sampling.target_quantity", "one of energy, stretch"),
}


@pytest.mark.parametrize("given", FAULTS)
def test_keys_that_contradict_one_another_have_their_places(mcgeo: Command, small: Path, given: str) -> None:
    place, key, words = FAULTS[given]
    small.write_text(SMALL.replace("  walkers: 8", f"  walkers: 8\n  {given}"))
    answer = mcgeo("sample", "run.yaml")
    assert answer.code == 2
    (line,) = answer.err.splitlines()
    assert line.startswith(f"run.yaml:{place}: {key}: ") and words in line
    assert not RESULTS.parent.exists()


def test_many_short_blocks_are_refused(mcgeo: Command, small: Path) -> None:
    small.write_text(OPEN.replace("target_error: ", "target_error: 1e-3").replace("blocks: 8", "blocks: 40"))
    answer = mcgeo("check", "run.yaml")
    assert answer.code == 2 and "1024 blocks of sweeps/blocks = 12 sweeps" in answer.err
    assert "its default is 32 times sweeps" in answer.err


def test_a_single_metric_of_the_torus_road_has_no_optimum(mcgeo: Command, small: Path) -> None:
    small.write_text(STRETCH + "  road: torus\n")
    answer = mcgeo("scan", "run.yaml")
    assert answer.code == 2 and "sampling.target_quantity: must be energy on the torus road" in answer.err


def test_growth_of_the_looks() -> None:
    """A tenth more each time, whole blocks, and the limit last."""
    ending = Ending(16, 100, Target("energy", 1e-3))
    counts = [0]
    while ending.look_after(counts[-1]) > counts[-1]:
        counts.append(ending.look_after(counts[-1]))
    assert counts == [0, 16, 18, 20, 22, 25, 28, 31, 35, 39, 43, 48, 53, 59, 65, 72, 80, 88, 97, 100]
    assert [n for n in range(120) if ending.is_look(n)] == counts[1:]
    assert Ending(16, 16, None).look_after(0) == 16
    assert ending.expected_blocks(16, 2e-3) == 64 and ending.expected_blocks(16, float("inf")) == 100
    assert ending.expected_blocks(16, 1e-4) == 16
