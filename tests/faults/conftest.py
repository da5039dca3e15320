"""A real result file, and ways to forge one."""

from __future__ import annotations

import io
from collections.abc import Callable

import h5py
import pytest

from mcgeo.cli import main
from mcgeo.runs.seal import seal
from mcgeo.runs.storage import FORMAT
from tests.cli.conftest import SMALL

Edit = Callable[[h5py.File], None]


@pytest.fixture(scope="session")
def liquid(tmp_path_factory: pytest.TempPathFactory) -> bytes:
    """Bytes of the result file of `SMALL`."""
    folder = tmp_path_factory.mktemp("liquid")
    (folder / "run.yaml").write_text(SMALL)
    assert main(["sample", str(folder / "run.yaml"), "--out", str(folder), "-q"]) == 0
    return (folder / "liquid.h5").read_bytes()


def forged(contents: bytes, edit: Edit) -> bytes:
    """The file edited through its library, with a seal that fits: only what the reader checks can refuse it."""
    buffer = io.BytesIO(contents)
    with h5py.File(buffer, "r+") as file:
        edit(file)
    seal(buffer.getbuffer(), FORMAT)
    return buffer.getvalue()
