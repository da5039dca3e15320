"""Random configurations, whole and damaged."""

import json
import re
import signal
from contextlib import contextmanager

import pytest
from hypothesis import HealthCheck, given, settings

from mcgeo.cli import main
from mcgeo.errors import ConfigError
from mcgeo.runs.config import config_from_resolved, load_config, resolved
from tests.unit.random_configurations import REAL, SWEEP, configurations, damaged, other_bytes, real_with_other_values


@settings(max_examples=200, deadline=None)
@given(configurations())
def test_valid_configurations_survive_resolving(tmp_path_factory, data):
    path = tmp_path_factory.getbasetemp() / "valid.yaml"
    path.write_text(json.dumps(data), encoding="utf-8")
    config = load_config(path)
    plain = resolved(config)
    assert json.loads(json.dumps(plain, allow_nan=False)) == plain
    again = config_from_resolved(plain)
    assert again == config
    assert resolved(again) == plain
    path.write_text(json.dumps(plain), encoding="utf-8")
    assert load_config(path) == config


@settings(max_examples=400, deadline=None)
@given(damaged())
def test_damaged_configurations_are_read_or_refused_in_plain_words(tmp_path_factory, data):
    path = tmp_path_factory.getbasetemp() / "damaged.yaml"
    text = json.dumps(data).replace("-Infinity", "-.inf").replace("Infinity", ".inf").replace("NaN", ".nan")
    path.write_text(text, encoding="utf-8")
    try:
        config = load_config(path)
    except ConfigError as error:
        assert error.faults
        columns = []
        for line in error.faults:
            match = re.fullmatch(rf"{re.escape(str(path))}:1:([1-9]\d*): \S.*: \S.*", line)
            assert match, line
            assert "pydantic" not in line
            assert "Input should" not in line
            assert line.encode("utf-8")
            columns.append(int(match[1]))
        assert columns == sorted(columns)
        with pytest.raises(ConfigError):
            config_from_resolved(data)
    else:
        assert config_from_resolved(resolved(config)) == config


SECONDS = 30


class Hung(BaseException):
    """Beyond every handler of errors."""


@contextmanager
def deadline():
    def ring(number, frame):
        raise Hung

    earlier = signal.signal(signal.SIGALRM, ring)
    signal.alarm(SECONDS)
    try:
        yield
    finally:
        signal.alarm(0)
        signal.signal(signal.SIGALRM, earlier)


def answered_in_plain_words(folder, content, capsys):
    """`mcgeo check` answers: a plan, or lines with their places; in time, without a traceback or a written file."""
    folder.mkdir(exist_ok=True)
    path = folder / "run.yaml"
    path.write_bytes(content)
    with deadline():
        code = main(["check", str(path)])
    captured = capsys.readouterr()
    assert [child.name for child in folder.iterdir()] == ["run.yaml"]
    if code == 0:
        assert captured.err == "" and captured.out
        return
    assert code == 2 and captured.out == ""
    lines = captured.err.splitlines()
    assert 1 <= len(lines) <= 51
    for line in lines:
        place = rf"{re.escape(str(path))}(:[1-9]\d*:[1-9]\d*: \S|: and [1-9]\d* more faults$)"
        assert re.match(place, line), line
        assert not re.search("pydantic|Input should|Traceback|Errno", line), line
        assert len(line) < 1500


def check_many(kind, n_cases, folder, capsys):
    @settings(max_examples=n_cases, deadline=None, suppress_health_check=list(HealthCheck))
    @given(kind)
    def check(content):
        answered_in_plain_words(folder, content, capsys)

    check()


@pytest.mark.parametrize("n_cases", [150, pytest.param(5000, marks=pytest.mark.long)])
@pytest.mark.parametrize(
    "kind",
    [real_with_other_values(), other_bytes(sorted(REAL.values())), other_bytes([SWEEP])],
    ids=["values", "bytes", "sweeps"],
)
def test_changed_configurations_are_answered_in_plain_words(tmp_path, capsys, kind, n_cases):
    check_many(kind, n_cases, tmp_path / "alone", capsys)
