"""Places in the configuration's file for faults that only building and running can find."""

from __future__ import annotations

import argparse
import functools
import re
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

from mcgeo.errors import ConfigError, GeometryError
from mcgeo.runs.config import Config
from mcgeo.runs.yaml_nodes import Mark
from mcgeo.runs.yaml_source import Fault, YamlSource, parse_yaml
from mcgeo.runs.yaml_source import Path as KeyPath

Result = TypeVar("Result")

_KEY = re.compile(r"([a-z_]+)((?:\.\w+|\[\d+\])*): (.*)", re.DOTALL)
_STEP = re.compile(r"\.(\w+)|\[(\d+)\]")
_YAML = (".yaml", ".yml")


def with_places(command: Callable[[argparse.Namespace], Result]) -> Callable[[argparse.Namespace], Result]:
    """The command, whose faults ``key.path: message`` and errors of geometry get the place of their key.

    The file is read once more for it, where ``arguments.config`` is a YAML file. An error of geometry whose key nobody
    knows is of the file as a whole.
    """

    @functools.wraps(command)
    def run(arguments: argparse.Namespace) -> Result:
        path: Path = arguments.config
        try:
            return command(arguments)
        except GeometryError as fault:
            if path.suffix not in _YAML:
                raise
            if fault.key:
                raise ConfigError(placed([f"{fault.key}: {fault}"], path)) from fault
            raise ConfigError([Fault(Mark(1, 1), (), str(fault)).line(str(path))]) from fault
        except ConfigError as fault:
            raise ConfigError(placed(fault.faults, path)) from fault

    return run


def placed(faults: list[str], path: Path) -> list[str]:
    """``file:line:column: key.path: message`` for every ``key.path: message``; other lines as they are."""
    found = [_KEY.fullmatch(fault) for fault in faults]
    if path.suffix not in _YAML or not any(found):
        return faults
    source, _ = parse_yaml(path)
    pairs = zip(faults, found, strict=True)
    return [fault if match is None else _placed(fault, match, source) for fault, match in pairs]


def _placed(fault: str, match: re.Match[str], source: YamlSource) -> str:
    section, steps, message = match.groups()
    if section not in Config.model_fields:
        return fault
    at: KeyPath = (section, *(name or int(position) for name, position in _STEP.findall(steps)))
    return Fault(source.locate(at), at, message).line(source.path)
