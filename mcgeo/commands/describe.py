"""``check``, ``info`` and ``schema``: commands that tell and do not run."""

from __future__ import annotations

import argparse
import json
import os
import platform
from importlib.metadata import version
from typing import Any

import mcgeo
from mcgeo.commands.run import as_json
from mcgeo.kernels._jit import cache_folder
from mcgeo.report.sweep_text import sweep_plan_text
from mcgeo.runs.build import available_threads
from mcgeo.runs.config import json_schema, load_config, resolved
from mcgeo.runs.places import with_places
from mcgeo.runs.plan import plan_of
from mcgeo.runs.processor import processor
from mcgeo.runs.sweep_estimate import sweep_summary
from mcgeo.runs.sweep_plan import has_sweep, load_sweep

_LIBRARIES = ("numpy", "numba", "llvmlite", "scipy", "matplotlib", "h5py", "PyYAML", "pydantic", "tqdm")


def _rows(summary: dict[str, Any]) -> str:
    flat = {k: v for k, v in summary.items() if not isinstance(v, dict)}
    for name, group in summary.items():
        if isinstance(group, dict):
            flat.update({f"{name}.{key}": value for key, value in group.items()})
    width = max(len(name) for name in flat)
    return "\n".join(f"{name.ljust(width)}  {value}" for name, value in flat.items())


@with_places
def run_check(arguments: argparse.Namespace) -> tuple[str, int]:
    """``mcgeo check``: the plan of a valid configuration and what it will cost."""
    if has_sweep(arguments.config):
        grid = load_sweep(arguments.config, allow_outside=arguments.allow_outside)
        sweep = sweep_summary(grid, available_threads())
        return as_json(sweep) if arguments.json else sweep_plan_text(sweep), 0
    plan = plan_of(resolved(load_config(arguments.config, allow_outside=arguments.allow_outside)))
    return as_json(plan) if arguments.json else _rows(plan), 0


def run_info(arguments: argparse.Namespace) -> tuple[str, int]:
    """``mcgeo info``: versions and machine."""
    facts: dict[str, Any] = {
        "mcgeo": mcgeo.__version__,
        "python": platform.python_version(),
        "system": platform.platform(),
        "processor": processor()["name"],
        "threads": available_threads(),
        "kernels": os.fspath(cache_folder()),
        "libraries": {name: version(name) for name in _LIBRARIES},
    }
    return as_json(facts) if arguments.json else _rows(facts), 0


def run_schema(arguments: argparse.Namespace) -> tuple[str, int]:
    """``mcgeo schema``."""
    return json.dumps(json_schema(), indent=2), 0
