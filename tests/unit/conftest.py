"""What the tests of configurations share."""

from pathlib import Path

import pytest


@pytest.fixture
def write(tmp_path, monkeypatch):
    """Writes ``run.yaml`` into an empty current directory and gives its name."""
    monkeypatch.chdir(tmp_path)

    def _write(content: str | bytes) -> str:
        Path("run.yaml").write_bytes(content.encode() if isinstance(content, str) else content)
        return "run.yaml"

    return _write
