"""Walkers that meet what is no number: the run stops, names walker and block, and keeps the blocks before."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from mcgeo.cli import main
from mcgeo.errors import NumericalError
from mcgeo.runs import production
from mcgeo.runs.storage import read_result
from mcgeo.sampling.blocks import BlockRecord
from mcgeo.sampling.soundness import require_sound_block, require_sound_walkers
from mcgeo.sampling.walkers import WalkerArrays
from mcgeo.states.laughlin import LaughlinGroup
from mcgeo.states.laughlin_droplet import LaughlinDropletGroup
from tests.cli.conftest import SMALL

DROPLET = SMALL + "geometry: {kind: disk}\n"
Poison = Callable[[Any], None]


def nowhere(group: Any) -> None:
    group.a[1, 3] = np.nan


def far_away(group: Any) -> None:
    group.b[2, 3] = np.inf


def overflown(group: Any) -> None:
    """So far out that squares overflow."""
    group.a[1, 3] = 1e200
    group.b[1, 3] = -1e200


def standing_still(group: Any) -> None:
    group.words[:, 3] = 0


@pytest.mark.parametrize(
    ("text", "group", "poison", "words"),
    [
        (SMALL, LaughlinGroup, nowhere, "positions that are no numbers"),
        (SMALL, LaughlinGroup, far_away, "positions that are no numbers"),
        (SMALL, LaughlinGroup, standing_still, "generator that stands still"),
        (DROPLET, LaughlinDropletGroup, nowhere, "positions that are no numbers"),
        (DROPLET, LaughlinDropletGroup, far_away, "positions that are no numbers"),
        (DROPLET, LaughlinDropletGroup, overflown, "a value of electron_electron that is no number"),
    ],
    ids=lambda value: getattr(value, "__name__", ""),
)
def test_run_stops_and_keeps_what_was_good(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    text: str,
    group: type,
    poison: Poison,
    words: str,
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "run.yaml").write_text(text)
    advance, next_block, poisoned = group.advance, production.next_block, [False]

    def advance_and_poison(self: Any, *arguments: Any) -> None:
        advance(self, *arguments)
        if poisoned[0]:
            poison(self)

    def fourth_block_poisoned(state: Any, measurement: Any, schedule: Any, chain: Any, stop: Any) -> Any:
        poisoned[0] = chain.blocks_done == 3
        return next_block(state, measurement, schedule, chain, stop)

    with monkeypatch.context() as patch:
        patch.setattr(group, "advance", advance_and_poison)
        patch.setattr(production, "next_block", fourth_block_poisoned)
        code = main(["sample", "run.yaml", "--out", ".", "-q"])
    captured = capsys.readouterr()
    assert code == 1 and captured.out == ""
    (line,) = captured.err.splitlines()
    assert line.startswith("walker 4 ") and words in line and "in block" in line and "please report it" in line
    kept = read_result(tmp_path / "liquid.h5")
    assert not kept.complete and kept.n_blocks == 3
    assert "in block 4 " in line and "the 3 blocks before are in liquid.h5" in line
    assert main(["scan", "liquid.h5", "-q"]) == 3
    # Without the poison the run goes on to its end.
    assert main(["sample", "run.yaml", "--out", ".", "-q"]) in (0, 3)
    assert read_result(tmp_path / "liquid.h5").complete


def test_sound_walkers_pass_and_those_that_fill_up_a_group_do_not_count() -> None:
    a, words = np.zeros((2, 4, 8)), np.ones((2, 4, 8), dtype=np.uint64)
    a[1, 0, 7] = np.nan
    require_sound_walkers(WalkerArrays(a, np.zeros_like(a), words), 15, "here")
    with pytest.raises(NumericalError, match="walker 16 is at positions that are no numbers here"):
        require_sound_walkers(WalkerArrays(a, np.zeros_like(a), words), 16, "here")


@pytest.mark.parametrize("name", ["structure", "energy", "acceptance"])
def test_each_measurement_is_looked_at(name: str) -> None:
    values = {"structure": np.ones((3, 5)), "energy": np.ones((3, 2)), "acceptance": np.ones(3)}
    values[name][1] = np.nan
    record = BlockRecord({"structure": values["structure"]}, {}, values["energy"], values["acceptance"], 0.0)
    with pytest.raises(NumericalError, match=f"walker 2 has a value of {name} that is no number here"):
        require_sound_block(record, "here")
