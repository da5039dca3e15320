"""A run that is stopped keeps its whole blocks, and the same command ends it as if nothing had happened."""

from __future__ import annotations

import json
import signal
import subprocess
from pathlib import Path

import h5py
import pytest

from mcgeo.cli import main
from tests.cli.conftest import SMALL, contents, python_process

# The program itself, but for a halt at the fourth block until the signal has come: in mid-run without a race.
WAIT_IN_FOURTH_BLOCK = """
import sys, time
from mcgeo.runs import production
advance, blocks = production.next_block, []
def next_block(*arguments):
    blocks.append(None)
    if len(blocks) == 4:
        print("fourth block", file=sys.stderr, flush=True)
        while not arguments[-1].is_set():
            time.sleep(0.01)
    return advance(*arguments)
production.next_block = next_block
from mcgeo.cli import main
sys.exit(main(sys.argv[1:]))
"""
# Volatile: they tell how long it took.
TIMES = {"seconds", "moves_per_second"}


def stop_when(process: subprocess.Popen[str], words: str, number: signal.Signals) -> tuple[int, str, str]:
    """Send the signal once ``words`` stand on standard error; exit code and both outputs after that."""
    assert process.stderr is not None
    lines = []
    for line in process.stderr:
        lines.append(line)
        if words in line:
            process.send_signal(number)
            break
    try:
        out, err = process.communicate(timeout=120)
    finally:
        process.kill()
    return process.returncode, out, "".join(lines) + err


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_interrupted_run_ends_like_an_uninterrupted_one(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], number: signal.Signals, code: int
) -> None:
    (tmp_path / "run.yaml").write_text(SMALL)
    command = ["sample", str(tmp_path / "run.yaml"), "--json", "--out"]
    process = python_process(tmp_path, "-c", WAIT_IN_FOURTH_BLOCK, *command, "stopped")
    found, out, err = stop_when(process, "fourth block", number)
    assert found == code and out == ""
    assert "3 whole blocks are in" in err and "the same command goes on" in err
    with h5py.File(tmp_path / "stopped/liquid.h5") as file:
        assert not file.attrs["complete"]
    # A result file already: it can be looked at, and says that it is short.
    assert main(["scan", str(tmp_path / "stopped/liquid.h5"), "--json"]) == 3
    found = json.loads(capsys.readouterr().out)["diagnostics"]
    assert found["verdict"] == "short" and found["reasons"][0] == "incomplete: 3 of 8 blocks"
    assert found["sweeps_to_add"] >= 5 * 60

    answers = []
    for folder in ("stopped", "whole"):
        assert main([*command, str(tmp_path / folder)]) == 0
        answers.append(json.loads(capsys.readouterr().out))
    for answer in answers:
        for key in TIMES:
            del answer[key]
    assert answers[0] == answers[1]
    stopped, whole = (contents(tmp_path / folder / "liquid.h5") for folder in ("stopped", "whole"))
    assert {name.split("/")[0] for name in whole} >= {"axes", "blocks", "checkpoint"}
    assert stopped == whole


def test_stop_before_the_first_block_leaves_nothing(tmp_path: Path) -> None:
    (tmp_path / "run.yaml").write_text(SMALL.replace("equilibration: 100", "equilibration: 60000"))
    process = python_process(tmp_path, "-m", "mcgeo", "sample", "run.yaml", "--out", "stopped")
    code, out, err = stop_when(process, "equilibrating", signal.SIGINT)
    assert code == 130 and out == ""
    assert "nothing is kept" in err and "Traceback" not in err
    assert not (tmp_path / "stopped").exists()


def test_reader_that_goes_away_is_no_error(tmp_path: Path) -> None:
    process = python_process(tmp_path, "-m", "mcgeo", "schema")
    assert process.stdout is not None and process.stderr is not None
    process.stdout.close()
    assert process.wait(timeout=60) == 0
    assert process.stderr.read() == ""
    process.stderr.close()


def test_stop_while_kernels_are_compiled_does_not_wait_for_them(tmp_path: Path) -> None:
    """The process is left at once; a run that had waited would tell of its equilibration."""
    (tmp_path / "run.yaml").write_text(SMALL)
    # Compilation that would go on until the process ends.
    slow = (
        "import sys, time\n"
        "from mcgeo.kernels import _jit\n"
        "from mcgeo.runs import start\n"
        "from mcgeo.cli import main\n"
        "def equilibrated(*arguments):\n"
        "    with _jit.event.trigger_event('numba:compile'):\n"
        "        print('in the compiler', file=sys.stderr, flush=True)\n"
        "        while True:\n"
        "            time.sleep(0.01)\n"
        "start.equilibrated = equilibrated\n"
        "sys.exit(main(sys.argv[1:]))\n"
    )
    process = python_process(tmp_path, "-c", slow, "sample", "run.yaml", "--out", "stopped")
    code, out, err = stop_when(process, "in the compiler", signal.SIGTERM)
    assert code == 143 and out == ""
    assert "interrupted while kernels were compiled" in err and "Traceback" not in err
    assert main(["sample", str(tmp_path / "run.yaml"), "--out", str(tmp_path / "stopped"), "-q"]) == 0
    assert sorted(path.name for path in (tmp_path / "stopped").iterdir()) == ["liquid.h5", "sample.json"]


def test_stop_on_the_torus_road_goes_on_at_the_same_metric(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "run.yaml").write_text(SMALL.replace("points: 6}", "points: 6}\n  road: torus"))
    command = ["scan", str(tmp_path / "run.yaml"), "--json", "--out"]
    process = python_process(tmp_path, "-c", WAIT_IN_FOURTH_BLOCK.replace("== 4", "== 20"), *command, "stopped")
    code, out, err = stop_when(process, "fourth block", signal.SIGTERM)
    assert code == 143 and out == "" and "3 whole blocks are in" in err
    answers = []
    for folder in ("stopped", "whole"):
        assert main([*command, str(tmp_path / folder)]) in (0, 3)
        captured = capsys.readouterr()
        answers.append(json.loads(captured.out))
    assert answers[0] == answers[1]
    for index in range(6):
        place = f"torus/metric_{index:03d}/liquid.h5"
        assert contents(tmp_path / "stopped" / place) == contents(tmp_path / "whole" / place)
