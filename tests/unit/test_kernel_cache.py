"""Compiled kernels on disk: used again, made anew when damaged or edited, done without where there is no room."""

import os
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest

import mcgeo
from mcgeo.kernels._jit import _mark_used

PACKAGE = Path(mcgeo.__file__).parent
PROGRAM = """
import numpy as np
from mcgeo.kernels.pair_histogram import add_pair_counts
a, b = np.random.default_rng(1).uniform(-0.5, 0.5, (2, 6, 8))
counts = np.zeros((60, 8), dtype=np.int64)
add_pair_counts(a, b, 0.1, 1.0, 12.0, 0.1, counts)
print(counts.sum(axis=1).tolist(), sum(add_pair_counts.stats.cache_hits.values()))
"""
WITH_CALLEE = """
import numpy as np
from mcgeo.kernels.laughlin_disk import log_weights
x, y, out = np.random.default_rng(1).normal(size=(3, 4, 8))
log_weights(3, x, y, out[0])
print(out[0].tolist(), sum(log_weights.stats.cache_hits.values()))
"""
NOTICE = "compiling kernels, once"


def run(environment, source=PACKAGE.parent, program=PROGRAM):
    """What the kernel found, how often it was taken from the cache, and standard error."""
    kept = {key: os.environ[key] for key in ("PATH", "NUMBA_DISABLE_JIT") if key in os.environ}
    done = subprocess.run(
        [sys.executable, "-c", program],
        env={**kept, "PYTHONPATH": str(source), "PYTHONDONTWRITEBYTECODE": "1", **environment},
        cwd=source,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    counts, _, hits = done.stdout.strip().rpartition(" ")
    return counts, int(hits), done.stderr


@pytest.fixture(scope="module")
def compiled(tmp_path_factory):
    """A cache folder with its kernels, and what they counted."""
    folder = tmp_path_factory.mktemp("cache")
    counts, hits, said = run({"NUMBA_CACHE_DIR": str(folder)})
    assert hits == 0
    assert said.count("\n") == 1
    assert NOTICE in said
    return folder, counts


def test_compiled_once(compiled):
    folder, counts = compiled
    assert run({"NUMBA_CACHE_DIR": str(folder)}) == (counts, 1, "")


def truncated(content):
    return content[: len(content) // 2]


def emptied(content):
    return b""


def with_a_wrong_bit(content):
    middle = len(content) // 2
    return content[:middle] + bytes([content[middle] ^ 1]) + content[middle + 1 :]


DAMAGE = [("nbi", truncated), ("nbi", emptied), ("nbc", truncated), ("nbc", emptied), ("nbc", with_a_wrong_bit)]


@pytest.mark.parametrize(("suffix", "damage"), DAMAGE)
def test_a_damaged_file_heals(compiled, tmp_path, suffix, damage):
    folder, counts = compiled
    environment = {"NUMBA_CACHE_DIR": str(shutil.copytree(folder, tmp_path / "cache"))}
    files = list((tmp_path / "cache").rglob(f"*.{suffix}"))
    assert files
    for file in files:
        file.write_bytes(damage(file.read_bytes()))
    found, hits, said = run(environment)
    assert (found, hits) == (counts, 0)
    assert NOTICE in said
    assert run(environment) == (counts, 1, "")


def test_an_edited_callee_is_not_taken_from_the_cache(tmp_path):
    # `split_exponent` is in another file than the kernel that calls it.
    shutil.copytree(PACKAGE, tmp_path / "mcgeo", ignore=shutil.ignore_patterns("__pycache__"))
    environment = {"NUMBA_CACHE_DIR": str(tmp_path / "cache")}
    values, _, _ = run(environment, tmp_path, WITH_CALLEE)
    assert run(environment, tmp_path, WITH_CALLEE) == (values, 1, "")
    callee = tmp_path / "mcgeo" / "kernels" / "elementary.py"
    callee.write_text(callee.read_text().replace("- splat_bits(1023)", "- splat_bits(1022)"))
    edited, hits, _ = run(environment, tmp_path, WITH_CALLEE)
    assert hits == 0
    assert edited != values


@pytest.mark.parametrize("environment", [{"HOME": "/proc/nowhere"}, {"NUMBA_CACHE_DIR": "/dev/null/cache"}])
def test_no_place_for_a_cache(compiled, environment):
    counts, hits, _ = run(environment)
    assert (counts, hits) == (compiled[1], 0)


def test_folders_that_nobody_uses_are_removed(tmp_path):
    now, day = time.time(), 86400.0
    names = {"0123456789abcdef": 40, "fedcba9876543210": 20, "another_program_": 40, "0123": 40}
    for name, age in names.items():
        (tmp_path / name).mkdir()
        (tmp_path / name / "last_used").touch()
        os.utime(tmp_path / name / "last_used", (now - age * day,) * 2)
    own = tmp_path / "00000000000000ff"
    own.mkdir()
    _mark_used(own, now)
    assert {path.name for path in tmp_path.iterdir()} == {*names, own.name} - {"0123456789abcdef"}
    # Dated today: the neighbours are left alone until tomorrow.
    _mark_used(own, now + 0.9 * day)
    assert (tmp_path / "fedcba9876543210").exists()
    _mark_used(own, now + 11.0 * day)
    assert not (tmp_path / "fedcba9876543210").exists()
