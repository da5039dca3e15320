"""Run the walkers of one configuration and keep what they measured in one file."""

from __future__ import annotations

import secrets
from contextlib import nullcontext, suppress
from pathlib import Path
from typing import Any

from mcgeo.errors import StorageError
from mcgeo.runs.atomic import remove_parts
from mcgeo.runs.build import problem_from, variation_from
from mcgeo.runs.catalogue import require_sampled_state
from mcgeo.runs.config import Config, resolved
from mcgeo.runs.droplet_scan import require_droplet_problem
from mcgeo.runs.experiment import experiment_of
from mcgeo.runs.length import continued, extended, missing_nothing
from mcgeo.runs.lock import run_lock
from mcgeo.runs.production import Production, Standing
from mcgeo.runs.progress import say
from mcgeo.runs.sampled import Sampled
from mcgeo.runs.sampling_config import STRETCH
from mcgeo.runs.scan import require_reach
from mcgeo.runs.signals import StopFlag, stop_on_signals
from mcgeo.runs.start import START_FILE, equilibrated_chains, seed_of_start
from mcgeo.runs.storage import previous_file, read_result

LIQUID_FILE = "liquid.h5"


def sample(
    config: Config,
    folder: Path,
    *,
    overwrite: bool = False,
    extend: int | None = None,
    quiet: bool = False,
    stop: StopFlag | None = None,
) -> Sampled:
    """The sampled liquid of a configuration: read when it is there, continued when cut short, otherwise run.

    A file with more blocks of the same length than asked for holds the liquid too; one with fewer is continued.

    Parameters
    ----------
    config : Config
    folder : Path
        Where the result file is, or comes to be.
    overwrite : bool
        Start anew, whatever the folder holds.
    extend : int, optional
        Sweeps to add to the finished run in the folder, rounded up to whole blocks.
    quiet : bool
        Nothing on standard error.
    stop : StopFlag, optional
        Set by the caller to end the run early; signals are then the caller's concern.

    Raises
    ------
    ConfigError
        If the liquid is one of the catalogue.
    StorageError
        If the folder cannot be written, is being written by another process, or holds a liquid of another
        configuration and ``overwrite`` is not set; if there is no finished run to extend.
    RunInterrupted
        On Ctrl-C or a request to terminate; whole blocks are in the file.
    """
    path = folder / LIQUID_FILE
    require_sampled_state(config.state.model_dump())
    held = None if overwrite or extend is not None else held_liquid(config, path)
    if held is None:
        return _made(config, path, overwrite, extend, quiet, stop)
    _remove_left_over(path)
    if not quiet:
        longer = config.sampling.target_error is None and held.n_blocks > config.sampling.blocks
        said = f", longer: {held.n_blocks} blocks where {config.sampling.blocks} are asked for" if longer else ""
        say(f"{path} holds this liquid already{said}")
    return held


def _remove_left_over(path: Path) -> None:
    """Remove what a run has left beside its whole file that was killed after writing it."""
    beside = [path.with_name(START_FILE), previous_file(path)]
    if any(left.exists() for left in beside) or any(path.parent.glob(f".{path.name}.*")):
        # Whoever may not write here, or writes at this moment, leaves things as they are.
        with suppress(StorageError, OSError), run_lock(path):
            remove_parts(path)
            for left in beside:
                left.unlink(missing_ok=True)


def held_liquid(config: Config, path: Path) -> Sampled | None:
    """The liquid of a configuration if the file holds the whole of it.

    Raises
    ------
    StorageError
        If the file holds a liquid of another configuration.
    """
    keys, earlier = _joined(config, path, overwrite=False, extend=None)
    return None if earlier is None else missing_nothing(keys, earlier)


def _made(
    config: Config, path: Path, overwrite: bool, extend: int | None, quiet: bool, stop: StopFlag | None
) -> Sampled:
    """The liquid after what is missing has been run."""
    _require_answer(config)
    # Refused before the folder is touched.
    _joined(config, path, overwrite, extend)
    with run_lock(path):
        # Another process may have gone on meanwhile.
        keys, earlier = _joined(config, path, overwrite, extend)
        result = missing_nothing(keys, earlier) if earlier is not None else None
        while result is None:
            earlier = _run(keys, path, earlier, quiet, stop)
            # An unfinished run gets the length it was first asked for, which may be less than is asked for now.
            keys = dict(earlier.resolved) if extend is not None else continued(path, resolved(config), earlier)
            result = missing_nothing(keys, earlier)
    return result


def _require_answer(config: Config) -> None:
    """Refuse, before anything is sampled, a problem whose optimum shall be known well and that has none."""
    if config.sampling.target_quantity != STRETCH:
        return
    keys = config.model_dump(mode="json", by_alias=True)
    problem = problem_from(keys["problem"])
    require_reach(problem, keys["scan"])
    if config.geometry.kind == "disk":
        require_droplet_problem(problem, variation_from(keys["problem"]))


def _joined(
    config: Config, path: Path, overwrite: bool, extend: int | None
) -> tuple[dict[str, Any], Sampled | None]:
    """Keys of the run to be made, and what the folder holds of it."""
    keys = resolved(config)
    earlier = None if overwrite or not path.exists() else read_result(path)
    if extend is not None:
        return extended(path, keys, earlier, extend), earlier
    return (keys if earlier is None else continued(path, keys, earlier)), earlier


def _run(
    keys: dict[str, Any], path: Path, earlier: Sampled | None, quiet: bool, given_stop: StopFlag | None
) -> Sampled:
    start = path.with_name(START_FILE)
    if keys["sampling"]["seed"] is None:
        drawn = seed_of_start(start, keys)
        keys["sampling"]["seed"] = secrets.randbits(63) if drawn is None else drawn
    experiment = experiment_of(keys)
    with stop_on_signals() if given_stop is None else nullcontext(given_stop) as stop:
        if earlier is None:
            standing = Standing(equilibrated_chains(start, keys, experiment, stop, quiet))
        else:
            standing = Standing.of(earlier)
        extending = earlier is not None and earlier.complete
        resume = "the same command" + " without --extend" * extending
        run = Production(keys, path, experiment, standing, quiet=quiet, resume=resume)
        if extending:
            # From now on the file says how long it shall be, and whoever comes after a kill goes on to that.
            run.save(complete=False)
        result = run.finish(stop)
    start.unlink(missing_ok=True)
    return result
