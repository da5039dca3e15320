"""``sweep``: a grid of problems and liquids, one command."""

from __future__ import annotations

import argparse
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from mcgeo.commands.run import CONVERGED_CODE, NOT_CONVERGED_CODE, Answer, as_json
from mcgeo.errors import ConfigError
from mcgeo.report.sweep_text import status_text, sweep_text
from mcgeo.report.tables import write_csv, write_json
from mcgeo.runs import sweep as engine
from mcgeo.runs.build import available_threads
from mcgeo.runs.executors import Crew, LocalCrew, single_threaded_libraries
from mcgeo.runs.lock import run_lock
from mcgeo.runs.sweep import Costs
from mcgeo.runs.sweep_estimate import costs_of, liquid_plans
from mcgeo.runs.sweep_file import write_sweep_file
from mcgeo.runs.sweep_note import noted_run
from mcgeo.runs.sweep_plan import SweepPlan, load_sweep
from mcgeo.runs.sweep_shards import gather, note_shard, shard_from, shard_plans, unfinished_shards
from mcgeo.runs.sweep_status import sweep_status
from mcgeo.runs.sweep_table import DONE, FAILED, MISSING, SweepTable, sweep_table

INCOMPLETE_CODE = 4

SWEEP_FILE, SWEEP_CSV, SWEEP_JSON = "sweep.h5", "sweep.csv", "sweep.json"


def sweep_folder(config: Path) -> Path:
    """NAME_sweep in the working folder for NAME.yaml."""
    return Path(f"{config.stem}_sweep")


def run_sweep(arguments: argparse.Namespace) -> Answer:
    """``mcgeo sweep``: do what is missing, then write the tables; with ``--status`` tell how far it is.

    ``--shard`` does a part and leaves the tables to ``--gather``.
    """
    if arguments.status:
        return _status(arguments)
    if arguments.shard is not None and arguments.gather is not None:
        raise ConfigError(["--shard and --gather: give one; the tables are made when all shards are done"])
    plan = load_sweep(arguments.config, allow_outside=arguments.allow_outside)
    folder = arguments.out or sweep_folder(arguments.config)
    costs = costs_of(plan, liquid_plans(plan))
    if arguments.gather is not None:
        summary = _gathered(plan, costs, folder, arguments.gather)
    elif arguments.shard is not None:
        summary = _shard(arguments, plan, costs, folder)
    else:
        crew = _crew(arguments, plan, folder)
        with run_lock(folder / SWEEP_FILE), single_threaded_libraries():
            engine.run_sweep(plan, folder, crew, costs, retry=arguments.retry, quiet=arguments.quiet)
            summary = write_tables(plan, sweep_table(plan, folder), folder)
    return as_json(summary) if arguments.json else sweep_text(summary), exit_code(summary)


def _shard(arguments: argparse.Namespace, plan: SweepPlan, costs: Costs, folder: Path) -> dict[str, Any]:
    shard = shard_from(arguments.shard)
    part = shard_plans(plan, costs, shard.of)[shard.number - 1]
    crew, options = _crew(arguments, plan, folder), {"retry": arguments.retry, "quiet": arguments.quiet}
    with run_lock(folder / f"shard-{shard.label}"), single_threaded_libraries():
        note_shard(folder, shard)
        engine.run_sweep(part, folder, crew, costs, label=f"-{shard.label}", **options)
        summary = summary_of(part, sweep_table(part, folder), folder)
    return {**summary, "shard": str(shard), "table": None}


def _gathered(plan: SweepPlan, costs: Costs, folder: Path, others: list[Path]) -> dict[str, Any]:
    with run_lock(folder / SWEEP_FILE):
        gather(others or [folder], folder)
        table = sweep_table(plan, folder)
        known = {point.name for point, status in zip(plan.points, table.status, strict=True) if status != MISSING}
        shards = [str(shard) for shard in unfinished_shards(plan, costs, folder, known)]
        return write_tables(plan, table, folder, unfinished_shards=shards)


def _status(arguments: argparse.Namespace) -> Answer:
    folder, config = arguments.out or sweep_folder(arguments.config), arguments.config
    if config.is_dir():
        folder, config = config, noted_run(config)["config"]
    found = sweep_status(load_sweep(config, allow_outside=arguments.allow_outside), folder)
    return as_json(found) if arguments.json else status_text(found), CONVERGED_CODE


def _crew(arguments: argparse.Namespace, plan: SweepPlan, folder: Path) -> Crew:
    scheduler = arguments.scheduler or _scheduler_of(plan)
    if scheduler is not None and arguments.workers is None:
        return _cluster(scheduler, folder, arguments.threads or 1)
    if arguments.scheduler is not None:
        raise ConfigError(["--scheduler and --workers: give one; the cluster's workers are started beside it"])
    cores = available_threads()
    return LocalCrew(arguments.workers or cores, cores, arguments.threads)


def _scheduler_of(plan: SweepPlan) -> str | None:
    given = plan.settings.scheduler
    if given is None or "://" in given:
        return given
    return str(Path(plan.file).parent / given)


def _cluster(scheduler: str, folder: Path, threads: int) -> Crew:
    try:
        from mcgeo.runs.cluster import ClusterCrew
    except ModuleNotFoundError as fault:
        if fault.name not in ("distributed", "dask"):
            raise
        raise ConfigError([f"{scheduler}: workers of a scheduler need dask: pip install 'mcgeo[cluster]'"]) from fault
    return ClusterCrew(scheduler, folder, threads)


def write_tables(plan: SweepPlan, table: SweepTable, folder: Path, **also: Any) -> dict[str, Any]:
    """``sweep.csv``, ``sweep.h5`` and ``sweep.json`` of a table; gives the content of the last."""
    summary = {**summary_of(plan, table, folder), **also}
    columns = {**table.swept(), "status": table.status, **table.columns}
    comment = (
        f"{Path(plan.file).name}: {summary['points']} points, {summary['done']} done\n"
        f"rows by mcgeo {', '.join(table.versions)}; one row per point, energies per electron"
    )
    write_csv(folder / SWEEP_CSV, {table.heading(name): values for name, values in columns.items()}, comment)
    write_sweep_file(folder / SWEEP_FILE, table)
    write_json(folder / SWEEP_JSON, summary)
    return summary


def summary_of(plan: SweepPlan, table: SweepTable, folder: Path) -> dict[str, Any]:
    """The JSON object of ``sweep``."""
    count = {name: int(np.sum(table.status == name)) for name in (DONE, FAILED, MISSING)}
    swept = table.swept()
    verdicts = table.columns.get("run_verdict", np.array([]))
    return {
        "axes": [
            {
                "keys": [column.name for column in axis],
                "units": [column.unit for column in axis],
                "values": [column.values.tolist() for column in axis],
                "spacing": spacing,
            }
            for axis, spacing in zip(table.axes, table.spacings, strict=True)
        ],
        "points": len(plan.points),
        **count,
        "not_converged": int(np.sum((verdicts != "converged") & (verdicts != ""))),
        "liquids": len(plan.liquids),
        "versions": table.versions,
        "shapes": _counted(table.columns.get("shape_verdict", ())),
        "failures": [
            {"point": {name: _item(values[place]) for name, values in swept.items()}, "error": why}
            for place, why in table.errors.items()
        ],
        "columns": {name: table.heading(name) for name in table.columns},
        "folder": str(folder),
        "table": str(folder / SWEEP_CSV),
    }


def _counted(words: Any) -> dict[str, int]:
    found = sorted({word for word in words if word})
    return {word: sum(other == word for other in words) for word in found}


def _item(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value


def exit_code(summary: Mapping[str, Any]) -> int:
    """4 where points failed or are missing, 3 where some have not converged."""
    if summary[FAILED] or summary[MISSING]:
        return INCOMPLETE_CODE
    return NOT_CONVERGED_CODE if summary["not_converged"] else CONVERGED_CODE
