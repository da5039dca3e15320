"""A process that runs commands one after another in limited memory, so that a crash or a hang is an answer too."""

from __future__ import annotations

import io
import json
import os
import resource
import select
import subprocess
import sys
import traceback
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path
from types import TracebackType

from tests.cli.conftest import ROOT, Answer

# Far more than any command here needs beyond what its libraries take, far less than the hostile inputs ask for.
SPARE_MEMORY = 400_000_000
_LONGEST = 60.0


class Child:
    """A context manager; with ``memory`` the address space may grow by so many bytes after the first command."""

    def __init__(self, folder: Path, memory: int | None = SPARE_MEMORY) -> None:
        environment = {**os.environ, "PYTHONPATH": os.fspath(ROOT), "OMP_NUM_THREADS": "1"}
        self._process = subprocess.Popen(
            [sys.executable, "-m", "tests.faults.child", json.dumps(memory)], cwd=folder, env=environment, text=True,
            stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL,
        )  # fmt: skip

    def __enter__(self) -> Child:
        return self

    def __exit__(self, kind: type[BaseException] | None, fault: BaseException | None, at: TracebackType | None) -> None:
        self._process.kill()
        self._process.communicate()

    def run(self, *arguments: str) -> Answer:
        """What a command, or ``read FILE``, gave; no hang, no end of the interpreter, no error not meant for users."""
        assert self._process.stdin is not None and self._process.stdout is not None
        self._process.stdin.write(json.dumps(arguments) + "\n")
        self._process.stdin.flush()
        ready, _, _ = select.select([self._process.stdout], [], [], _LONGEST)
        assert ready, f"{arguments} hangs"
        line = self._process.stdout.readline()
        assert line, f"{arguments} ended the interpreter: {self._process.wait()}"
        code, out, err = json.loads(line)
        assert code != "traceback", err
        return Answer(code, out, err)


def _answer(arguments: list[str]) -> list[object]:
    from mcgeo.cli import main
    from mcgeo.errors import McgeoError
    from mcgeo.runs.storage import read_result

    out, err = io.StringIO(), io.StringIO()
    with redirect_stdout(out), redirect_stderr(err):
        try:
            if arguments[0] == "read":
                read_result(Path(arguments[1]))
                code: object = 0
            else:
                code = main(arguments)
        except McgeoError as fault:
            code = fault.exit_code
            print(fault, file=sys.stderr)
        except SystemExit as stop:
            code = stop.code
        except BaseException:
            code = "traceback"
            traceback.print_exc()
    return [code, out.getvalue(), err.getvalue()]


def _address_space() -> int:
    pages = int(Path("/proc/self/statm").read_text().split()[0])
    return pages * resource.getpagesize()


def serve(memory: int | None) -> None:
    """Answer one command per line of standard input."""
    answers, sys.stdout = sys.stdout, sys.stderr
    for count, line in enumerate(sys.stdin):
        answers.write(json.dumps(_answer(json.loads(line))) + "\n")
        answers.flush()
        if count == 0 and memory is not None:
            resource.setrlimit(resource.RLIMIT_AS, (_address_space() + memory, resource.RLIM_INFINITY))


if __name__ == "__main__":
    serve(json.loads(sys.argv[1]))
