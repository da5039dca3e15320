"""``sample``, and what the commands that run share."""

from __future__ import annotations

import argparse
import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from mcgeo.errors import ConfigError
from mcgeo.report.tables import json_ready, write_json
from mcgeo.report.text import droplet_text, sample_text
from mcgeo.runs.config import Config, config_from_resolved, load_config
from mcgeo.runs.droplet import Droplet
from mcgeo.runs.droplet_summary import droplet_summary
from mcgeo.runs.places import with_places
from mcgeo.runs.sample import LIQUID_FILE, sample
from mcgeo.runs.sample_summary import sample_summary
from mcgeo.runs.storage import RESULT_SUFFIX, as_liquid, read_result
from mcgeo.runs.units import with_units

CONVERGED_CODE, NOT_CONVERGED_CODE = 0, 3

Answer = tuple[str, int]


def as_json(summary: Mapping[str, Any]) -> str:
    """One JSON object; numbers without meaning are null."""
    return json.dumps(json_ready(summary), indent=2, allow_nan=False)


def default_folder(config: Path) -> Path:
    """NAME_results in the working folder for NAME.yaml; a result file's own folder."""
    return config.parent if config.suffix == RESULT_SUFFIX else Path(f"{config.stem}_results")


def exit_code(summary: Mapping[str, Any]) -> int:
    return CONVERGED_CODE if summary["diagnostics"]["verdict"] == "converged" else NOT_CONVERGED_CODE


def result_file(path: Path) -> Path:
    """The result file in a folder, or the file itself."""
    return path / LIQUID_FILE if path.is_dir() else path


def read_config(path: Path, arguments: argparse.Namespace) -> Config:
    """Of a YAML file or a result file, with the options that a command has for it."""
    if path.suffix == RESULT_SUFFIX:
        config = config_from_resolved(read_result(path).resolved)
    else:
        config = load_config(path, allow_outside=arguments.allow_outside)
    threads = arguments.threads
    if threads is None:
        return config
    return config.model_copy(update={"sampling": config.sampling.model_copy(update={"threads": threads})})


@with_places
def run_sample(arguments: argparse.Namespace) -> Answer:
    """``mcgeo sample``."""
    arguments.config = result_file(arguments.config)
    config = read_config(arguments.config, arguments)
    folder = arguments.out or default_folder(arguments.config)
    if arguments.extend is not None and arguments.overwrite:
        raise ConfigError(["--extend keeps what --overwrite throws away; give one of them"])
    options = {"overwrite": arguments.overwrite, "extend": arguments.extend, "quiet": arguments.quiet}
    result = sample(config, folder, **options)
    if isinstance(result, Droplet):
        summary, words = droplet_summary(result), droplet_text
    else:
        summary, words = sample_summary(as_liquid(result, folder)), sample_text
    summary = with_units(summary, result.resolved)
    write_json(folder / "sample.json", summary)
    return as_json(summary) if arguments.json else words(summary), exit_code(summary)
