"""``scan``: the energy over the metric, on the plane or on the torus, and both side by side."""

from __future__ import annotations

import argparse
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from mcgeo.commands.run import Answer, as_json, default_folder, exit_code, read_config, result_file
from mcgeo.errors import ConfigError, StorageError
from mcgeo.report.catalogue_text import origin_text
from mcgeo.report.tables import write_csv, write_json
from mcgeo.report.text import comparison_text, scan_text, torus_text
from mcgeo.runs.build import problem_from, variation_from
from mcgeo.runs.catalogue import KIND, CatalogueLiquid, catalogue_liquid
from mcgeo.runs.catalogue_summary import with_error_parts
from mcgeo.runs.config import Config, differing_keys, resolved
from mcgeo.runs.droplet_scan import require_droplet_problem
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.places import with_places
from mcgeo.runs.sample import sample
from mcgeo.runs.sampled import Sampled
from mcgeo.runs.scan import require_reach, scan, scan_summary
from mcgeo.runs.scannable import Scannable
from mcgeo.runs.storage import RESULT_SUFFIX, as_liquid, read_result
from mcgeo.runs.torus_road import compare_roads, torus_road
from mcgeo.runs.torus_summary import comparison_summary, torus_summary
from mcgeo.runs.units import with_units
from mcgeo.variational.variation import PROJECTED

_ENERGY = "[e^2/(4 pi eps l_B) per electron]"


@with_places
def run_scan(arguments: argparse.Namespace) -> Answer:
    """``mcgeo scan``: samples first when a liquid is missing."""
    arguments.config = result_file(arguments.config)
    config = read_config(arguments.config, arguments)
    folder = arguments.out or default_folder(arguments.config)
    keys = config.model_dump(mode="json", by_alias=True)
    require_reach(problem_from(keys["problem"]), keys["scan"])
    if config.geometry.kind == "disk":
        _require_disk_problem(arguments, keys)
    if arguments.compare:
        if config.state.kind == KIND:
            raise ConfigError(["--compare needs a state that is sampled on the torus, not one of the catalogue"])
        if config.problem.variation != PROJECTED:
            raise ConfigError(["--compare needs problem.variation: projected, the one problem that both roads share"])
        summary, words = _on_both_roads(arguments, config, folder, keys), comparison_text
    elif config.scan.road == "torus":
        road = torus_road(config, folder / "torus", overwrite=arguments.overwrite, quiet=arguments.quiet)
        summary, words = torus_summary(road, keys["problem"]), torus_text
    else:
        summary, words = _on_the_plane(arguments, config, folder, keys), scan_text
    summary = with_units(summary, keys)
    write_json(folder / "scan.json", summary)
    write_csv(folder / "curve.csv", _columns(summary["curve"]), _provenance(summary))
    return as_json(summary) if arguments.json else words(summary), exit_code(summary)


def _on_the_plane(
    arguments: argparse.Namespace, config: Config, folder: Path, keys: Mapping[str, Any]
) -> dict[str, Any]:
    liquid: Scannable
    if config.state.kind == KIND and arguments.liquid is None:
        liquid = catalogue_liquid(keys["state"])
    else:
        liquid = _sampled(arguments, config, folder)
    summary = scan_summary(liquid, keys["problem"], scan(liquid, keys["problem"], keys["scan"]))
    return with_error_parts(summary, liquid, keys["problem"]) if isinstance(liquid, CatalogueLiquid) else summary


def _require_disk_problem(arguments: argparse.Namespace, keys: Mapping[str, Any]) -> None:
    """Refuse, before anything is sampled, what a droplet cannot answer."""
    if arguments.compare or keys["scan"]["road"] == "torus":
        raise ConfigError(["the torus road needs geometry.kind: torus, not disk"])
    require_droplet_problem(problem_from(keys["problem"]), variation_from(keys["problem"]))


def _sampled(arguments: argparse.Namespace, config: Config, folder: Path) -> Sampled:
    if arguments.liquid is not None:
        path = result_file(arguments.liquid)
        return _of_the_same_state(read_result(path), config, path)
    if arguments.config.suffix == RESULT_SUFFIX:
        return read_result(arguments.config)
    return sample(config, folder, overwrite=arguments.overwrite, quiet=arguments.quiet)


def _of_the_same_state(result: Sampled, config: Config, path: Path) -> Sampled:
    """Refuse a liquid of another state: fields and lengths of the configuration belong to its own."""
    differences = differing_keys(result.resolved, resolved(config), ("state",))
    if differences:
        listed = "\n  ".join(differences)
        raise StorageError(f"{path} holds another state than the configuration (in the file and wanted):\n  {listed}")
    return result


def _liquid_of(arguments: argparse.Namespace, config: Config, folder: Path) -> Liquid:
    return as_liquid(_sampled(arguments, config, folder), arguments.liquid or folder)


def _on_both_roads(
    arguments: argparse.Namespace, config: Config, folder: Path, keys: Mapping[str, Any]
) -> dict[str, Any]:
    """The scan of the plane with the torus beside it."""
    liquid = _liquid_of(arguments, config, folder)
    found = scan(liquid, keys["problem"], keys["scan"])
    road = torus_road(config, folder / "torus", overwrite=arguments.overwrite, quiet=arguments.quiet)
    return {
        **scan_summary(liquid, keys["problem"], found),
        "torus": torus_summary(road, keys["problem"])["optimum"],
        "comparison": comparison_summary(compare_roads(road, liquid, found.surface)),
    }


def _columns(curve: list[dict[str, Any]]) -> dict[str, list[float]]:
    columns = {
        "stretch": [point["stretch"] for point in curve],
        f"energy {_ENERGY}": [point["energy"] for point in curve],
        f"energy error {_ENERGY}": [point["energy_error"] for point in curve],
    }
    if "difference_error" in curve[0]:
        differences = [point["difference_error"] for point in curve]
        columns[f"error of the difference to the minimum {_ENERGY}"] = differences
    return columns


def _provenance(summary: Mapping[str, Any]) -> str:
    angle = summary["curve"][0]["angle_degrees"]
    what = f"{summary['state']['label']}, energy against the hole's stretch at {angle:g} degrees"
    return f"{what}\n{origin_text(summary['state'])}" if "origin" in summary["state"] else what
