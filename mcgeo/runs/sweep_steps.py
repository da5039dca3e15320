"""What of a liquid's sampling one task of a sweep does: all of it, or a step of a run whose walkers are divided."""

from __future__ import annotations

from pathlib import Path
from typing import Literal, NamedTuple

from mcgeo.runs.config import Config
from mcgeo.runs.parts import equilibrate, merge_parts, part_path, sample_part
from mcgeo.runs.sample import LIQUID_FILE, sample
from mcgeo.runs.signals import StopFlag


class Step(NamedTuple):
    """One task: ``equilibrate``, then every ``part``, then ``merge``; or the ``whole`` run."""

    kind: Literal["whole", "equilibrate", "part", "merge"] = "whole"
    part: int = 0
    n_parts: int = 1

    def file(self, folder: Path) -> Path:
        """The file whose blocks tell how far the step has come."""
        return part_path(folder, self.part, self.n_parts) if self.kind == "part" else folder / LIQUID_FILE

    def next(self) -> list[Step]:
        """Steps that may begin when all of this kind are done."""
        if self.kind == "equilibrate":
            return [Step("part", part, self.n_parts) for part in range(self.n_parts)]
        return [Step("merge", 0, self.n_parts)] if self.kind == "part" else []


WHOLE = Step()


def first_step(n_parts: int) -> Step:
    """How a sampling begins whose walkers are divided into so many parts."""
    return WHOLE if n_parts == 1 else Step("equilibrate", 0, n_parts)


def take_step(step: Step, config: Config, folder: Path, stop: StopFlag) -> None:
    """Do it; what is done of it already is not done again.

    Raises
    ------
    ConfigError, GeometryError, StorageError, RunInterrupted
        As `mcgeo.runs.sample.sample`, and `mcgeo.runs.parts`.
    """
    if step.kind == "equilibrate":
        equilibrate(config, folder, quiet=True, stop=stop)
    elif step.kind == "part":
        sample_part(config, folder, step.part, step.n_parts, quiet=True, stop=stop)
    elif step.kind == "merge":
        merge_parts(config, folder, step.n_parts)
    else:
        sample(config, folder, quiet=True, stop=stop)
