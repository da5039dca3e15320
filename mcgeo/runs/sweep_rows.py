"""What a sweep knows of its points: files of rows, each of points of one liquid, written whole and never changed.

A row holds the numbers of one optimum. Rows that have the liquid's own numbers in common keep them once per file.
"""

from __future__ import annotations

import hashlib
import json
import math
import time
from collections.abc import Container, Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import mcgeo
from mcgeo.errors import StorageError
from mcgeo.runs.atomic import write_whole

FORMAT = "mcgeo-rows/1"
POINTS = "points"

_SECONDS_OF_A_WRITER = 3600.0

Row = Mapping[str, Any]


@dataclass(frozen=True)
class RowFile:
    """Rows of points that share a liquid.

    Attributes
    ----------
    liquid : str
        Hash of the liquid.
    shared : mapping
        Columns with one value for all rows.
    columns : list of str
        Names of the other columns.
    rows : mapping of str to list
        Point -> one value per column; None for what has no meaning.
    failed : mapping of str to str
        Point -> why it has no row.
    seconds : float
        Time it took, of one core.
    version : str
        That of the program which made the rows.
    """

    liquid: str
    shared: Row = field(default_factory=dict)
    columns: list[str] = field(default_factory=list)
    rows: Mapping[str, list[Any]] = field(default_factory=dict)
    failed: Mapping[str, str] = field(default_factory=dict)
    seconds: float = 0.0
    version: str = mcgeo.__version__

    @classmethod
    def of(
        cls, liquid: str, shared: Row, rows: Mapping[str, Row], failed: Mapping[str, str], seconds: float
    ) -> RowFile:
        """From rows with any columns."""
        columns = list(dict.fromkeys(name for row in rows.values() for name in row))
        listed = {point: [_plain(row.get(name)) for name in columns] for point, row in rows.items()}
        return cls(liquid, {name: _plain(value) for name, value in shared.items()}, columns, listed, failed, seconds)

    @property
    def name(self) -> str:
        """File name: of the liquid and of the points that it speaks of."""
        points = hashlib.sha256("".join(sorted([*self.rows, *self.failed])).encode()).hexdigest()
        return f"{self.liquid}-{points[:12]}.json"

    def write(self, folder: Path) -> None:
        """Write the file into a sweep's folder.

        Raises
        ------
        OSError
            If it cannot be written.
        """
        data = {"format": FORMAT, **{name: getattr(self, name) for name in self.__dataclass_fields__}}
        text = json.dumps(data, allow_nan=False, separators=(",", ":"))
        write_whole(folder / POINTS / self.name, text.encode())


def _plain(value: Any) -> Any:
    return None if isinstance(value, float) and not math.isfinite(value) else value


def row_files(folder: Path, liquids: Container[str] | None = None) -> Iterator[RowFile]:
    """All files of rows in a sweep's folder, or those of some liquids, in the order of their names.

    Raises
    ------
    StorageError
        If one is damaged or of another version of the format.
    """
    for path in sorted((folder / POINTS).glob("*.json")):
        if liquids is not None and path.name.partition("-")[0] not in liquids:
            continue
        try:
            data = json.loads(path.read_bytes())
            if data.pop("format") != FORMAT:
                raise ValueError("another format")
            found = RowFile(**data)
            if any(len(row) != len(found.columns) for row in found.rows.values()):
                raise ValueError("rows of another length than the columns")
        except FileNotFoundError:
            continue
        except (OSError, ValueError, TypeError, KeyError, AttributeError) as fault:
            raise StorageError(
                f"{path}: damaged or not a file of rows of this version ({fault}); remove it, and its points are "
                "computed again"
            ) from fault
        yield found


@dataclass(frozen=True)
class Known:
    """What a folder knows of points, whichever sweep they were computed for.

    Attributes
    ----------
    done : mapping of str to bool
        Point -> whether its run has converged.
    failed : mapping of str to str
        Point -> why, for those that have no row.
    """

    done: Mapping[str, bool]
    failed: Mapping[str, str]


def known_points(folder: Path, liquids: Container[str] | None = None) -> Known:
    """The points of a folder, or those of some liquids; a row counts more than a failure of the same point.

    Raises
    ------
    StorageError
        As `row_files`.
    """
    done: dict[str, bool] = {}
    failed: dict[str, str] = {}
    for file in row_files(folder, liquids):
        converged = file.shared.get("run_verdict") == "converged"
        done.update(dict.fromkeys(file.rows, converged))
        failed.update(file.failed)
    return Known(done, {point: why for point, why in failed.items() if point not in done})


def tidy(folder: Path) -> None:
    """Remove partial files of rows that a killed writer left; a young one may be another machine's, at work."""
    for path in (folder / POINTS).glob(".*.part"):
        with suppress(OSError):
            if time.time() - path.stat().st_mtime > _SECONDS_OF_A_WRITER:
                path.unlink()
