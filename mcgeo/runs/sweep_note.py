"""What a sweep leaves in its folder to say whose it is and how many work on it."""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import Any

from mcgeo.errors import StorageError
from mcgeo.runs.atomic import write_whole
from mcgeo.runs.executors import Crew
from mcgeo.runs.sweep_plan import SweepPlan

RUN_FILE = "run.json"


def note_run(folder: Path, plan: SweepPlan, crew: Crew) -> None:
    """Leave in the folder which configuration it belongs to, and how many work on it.

    Raises
    ------
    OSError
        If the folder cannot be written.
    """
    facts = {"config": os.path.abspath(plan.file), "workers": crew.tasks, "threads": crew.threads}
    write_whole(folder / RUN_FILE, json.dumps(facts, indent=2).encode())


def noted_run(folder: Path) -> dict[str, Any]:
    """What `note_run` left.

    Raises
    ------
    StorageError
        If it is not there.
    """
    try:
        facts = json.loads((folder / RUN_FILE).read_bytes())
        return {"config": Path(facts["config"]), "workers": int(facts["workers"]), "threads": int(facts["threads"])}
    except (OSError, ValueError, KeyError, TypeError) as fault:
        raise StorageError(f"{folder}: not the folder of a sweep ({fault}); give its configuration") from fault
