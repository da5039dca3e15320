"""A run in parts is the run in one piece, to the last bit."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from mcgeo.errors import ConfigError, RunInterrupted, StorageError
from mcgeo.runs import production
from mcgeo.runs.config import Config, config_from_resolved
from mcgeo.runs.parts import equilibrate, group_range, merge_parts, part_path, sample_part
from mcgeo.runs.sample import LIQUID_FILE, sample
from mcgeo.runs.start import START_FILE
from mcgeo.sampling.blocks import Interrupted
from tests.cli.conftest import contents

STATES = {
    "laughlin": {"kind": "laughlin", "exponent": 3, "electrons": 5},
    "all_sectors": {"kind": "moore_read", "filling": "1/2", "electrons": 4, "sector": "all"},
}


def config(state: str, **sampling: object) -> Config:
    # 29 walkers are four groups, the last one of five walkers.
    default = {
        "walkers": 29, "sweeps": 24, "blocks": 4, "equilibration": 20, "seed": 3, "threads": 1, "q_max": 4.0,
    }  # fmt: skip
    return config_from_resolved({"state": STATES[state], "sampling": {**default, **sampling}})


@pytest.fixture(scope="module")
def unsplit(tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], dict[str, bytes]]:
    """Contents of the file that a run in one piece leaves."""
    kept: dict[str, dict[str, bytes]] = {}

    def of(state: str) -> dict[str, bytes]:
        if state not in kept:
            folder = tmp_path_factory.mktemp("whole")
            sample(config(state), folder, quiet=True)
            kept[state] = contents(folder / LIQUID_FILE)
        return kept[state]

    return of


@pytest.mark.parametrize("n_parts", [2, 3])
@pytest.mark.parametrize("state", STATES)
def test_parts_in_any_order_make_the_unsplit_run(
    tmp_path: Path, unsplit: Callable[[str], dict[str, bytes]], state: str, n_parts: int
) -> None:
    equilibrate(config(state), tmp_path, quiet=True)
    for part in reversed(range(n_parts)):
        # On how many threads each part runs is its own affair.
        sample_part(config(state, threads=1 + part % 2), tmp_path, part, n_parts, quiet=True)
    merged = merge_parts(config(state), tmp_path, n_parts)
    assert contents(tmp_path / LIQUID_FILE) == unsplit(state)
    assert merged.complete and merged.blocks.accepted.shape[2] == 29
    assert [path.name for path in tmp_path.iterdir()] == [LIQUID_FILE]
    again = merge_parts(config(state), tmp_path, n_parts)
    assert again.n_blocks == 4 and contents(tmp_path / LIQUID_FILE) == unsplit(state)


def test_broken_part_is_not_the_unsplit_run(
    tmp_path: Path, unsplit: Callable[[str], dict[str, bytes]], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The comparison sees a single walker that has drawn other numbers."""
    equilibrate(config("laughlin"), tmp_path, quiet=True)
    sample_part(config("laughlin"), tmp_path, 0, 2, quiet=True)
    advance = production.next_block

    def other_words(state, measurement, schedule, chain, stop):
        chain.walkers.words[0, 0, 3] ^= 1
        return advance(state, measurement, schedule, chain, stop)

    monkeypatch.setattr(production, "next_block", other_words)
    sample_part(config("laughlin"), tmp_path, 1, 2, quiet=True)
    merge_parts(config("laughlin"), tmp_path, 2)
    assert contents(tmp_path / LIQUID_FILE) != unsplit("laughlin")


def test_part_cut_short_goes_on(
    tmp_path: Path, unsplit: Callable[[str], dict[str, bytes]], monkeypatch: pytest.MonkeyPatch
) -> None:
    state = "all_sectors"
    equilibrate(config(state), tmp_path, quiet=True)
    advance, left = production.next_block, [0]

    def limited(*arguments):
        if left[0] == 0:
            raise Interrupted
        left[0] -= 1
        return advance(*arguments)

    with monkeypatch.context() as patch:
        patch.setattr(production, "next_block", limited)
        # Three components make a block; the second stop is in the middle of one.
        for blocks in (0, 3, 5):
            left[0] = blocks
            with pytest.raises(RunInterrupted):
                sample_part(config(state), tmp_path, 1, 2, quiet=True)
    with pytest.raises(StorageError, match="part 1 of 2 is not finished: no such file"):
        merge_parts(config(state), tmp_path, 2)
    sample_part(config(state), tmp_path, 0, 2, quiet=True)
    with pytest.raises(StorageError, match="part 2 of 2 is not finished: 2 of 4 blocks"):
        merge_parts(config(state), tmp_path, 2)
    sample_part(config(state), tmp_path, 1, 2, quiet=True)
    merge_parts(config(state), tmp_path, 2)
    assert contents(tmp_path / LIQUID_FILE) == unsplit(state)


def test_equilibration_is_kept_by_component(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from mcgeo.runs import start

    run, done = start.equilibrated, []

    def limited(state, schedule, stop):
        if len(done) == 2:
            raise Interrupted
        done.append(schedule.component)
        return run(state, schedule, stop)

    monkeypatch.setattr(start, "equilibrated", limited)
    with pytest.raises(RunInterrupted, match="2 of 3 components are equilibrated, and kept"):
        equilibrate(config("all_sectors"), tmp_path, quiet=True)
    with pytest.raises(StorageError, match="no equilibrated walkers"):
        sample_part(config("all_sectors"), tmp_path, 0, 2, quiet=True)
    done[:] = [None]
    equilibrate(config("all_sectors"), tmp_path, quiet=True)
    assert done == [None, 2]
    # Done: nothing is run again.
    kept = (tmp_path / START_FILE).read_bytes()
    equilibrate(config("all_sectors"), tmp_path, quiet=True)
    assert (tmp_path / START_FILE).read_bytes() == kept
    # Walkers of another configuration are none of this one.
    with pytest.raises(StorageError, match="no equilibrated walkers"):
        sample_part(config("all_sectors", seed=4), tmp_path, 0, 2, quiet=True)


def test_part_of_another_run_is_refused(tmp_path: Path) -> None:
    equilibrate(config("laughlin"), tmp_path, quiet=True)
    for part in range(2):
        sample_part(config("laughlin"), tmp_path, part, 2, quiet=True)
    kept = part_path(tmp_path, 0, 2).read_bytes()
    with pytest.raises(StorageError, match=r"sampling\.seed: 3 and 4"):
        merge_parts(config("laughlin", seed=4), tmp_path, 2)
    assert part_path(tmp_path, 0, 2).read_bytes() == kept
    part_path(tmp_path, 0, 3).write_bytes(kept)
    with pytest.raises(StorageError, match=r"sampling\.walkers: 16 and 8"):
        sample_part(config("laughlin"), tmp_path, 0, 3, quiet=True)


def test_division_into_groups() -> None:
    for n_walkers, n_parts in ((8, 1), (29, 2), (29, 3), (29, 4), (1000, 7)):
        dealt = [group for part in range(n_parts) for group in group_range(n_walkers, part, n_parts)]
        assert dealt == list(range(-(-n_walkers // 8)))
        assert all(len(group_range(n_walkers, part, n_parts)) > 0 for part in range(n_parts))
    with pytest.raises(ConfigError, match="29 walkers are 4 groups"):
        group_range(29, 0, 5)


@pytest.mark.parametrize(("key", "value"), [("seed", None), ("target_error", 1e-4)])
def test_what_is_left_open_is_refused(tmp_path: Path, key: str, value: float | None) -> None:
    open_run = config("laughlin", **{key: value})
    for work in (
        lambda: equilibrate(open_run, tmp_path),
        lambda: sample_part(open_run, tmp_path, 0, 2),
        lambda: merge_parts(open_run, tmp_path, 2),
    ):
        with pytest.raises(ConfigError, match=rf"sampling\.{key}"):
            work()
