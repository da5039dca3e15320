"""Tables and JSON beside the figures: every digit, written whole or not at all."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Mapping
from itertools import zip_longest
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from mcgeo.runs.atomic import write_whole


def map_table(x: ArrayLike, y: ArrayLike, values: ArrayLike, headings: tuple[str, str, str]) -> dict[str, NDArray[Any]]:
    """Long table of a map: one line per grid point, x running fastest.

    Parameters
    ----------
    x, y : array_like, shapes (n,) and (m,)
    values : array_like, shape (m, n)
    headings : tuple of str
        Of x, y and the values.

    Raises
    ------
    ValueError
        If the shapes do not belong together.
    """
    x, y, values = np.asarray(x), np.asarray(y), np.asarray(values)
    if values.shape != (len(y), len(x)):
        raise ValueError(f"a map over {len(x)} x and {len(y)} y has shape {(len(y), len(x))}, not {values.shape}")
    columns = (np.tile(x, len(y)), np.repeat(y, len(x)), values.ravel())
    return dict(zip(headings, columns, strict=True))


def csv_bytes(columns: Mapping[str, ArrayLike], comment: str) -> bytes:
    """The table as UTF-8: comment lines ``# ...``, headings, rows.

    Floats have the shortest digits that read back to the same number. Shorter columns end in empty cells.

    Raises
    ------
    ValueError
        If a column is not one-dimensional.
    """
    cells = []
    for heading, column in columns.items():
        array = np.asarray(column)
        if array.ndim != 1:
            raise ValueError(f"column {heading!r} has {array.ndim} dimensions; a table takes one (see map_table)")
        cells.append(array.tolist())
    text = io.StringIO()
    for line in comment.splitlines():
        text.write(f"# {line}\n")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(zip_longest(*cells, fillvalue=""))
    return text.getvalue().encode()


def write_csv(path: Path, columns: Mapping[str, ArrayLike], comment: str) -> None:
    """Write `csv_bytes` to ``path``.

    Parameters
    ----------
    columns : mapping
        Heading, with its unit, to values of shape (n,).
    comment : str
        Where the numbers come from.
    """
    write_whole(path, csv_bytes(columns, comment))


def json_ready(obj: Any) -> Any:
    """The same in JSON's types: arrays become lists; NaN and infinities, which JSON does not have, null.

    Raises
    ------
    TypeError
        If there is something JSON cannot hold.
    """
    if isinstance(obj, Mapping):
        return {str(key): json_ready(value) for key, value in obj.items()}
    if isinstance(obj, np.ndarray | np.generic):
        return json_ready(obj.tolist())
    if isinstance(obj, list | tuple):
        return [json_ready(value) for value in obj]
    if isinstance(obj, float):
        return obj if math.isfinite(obj) else None
    if obj is None or isinstance(obj, str | int):
        return obj
    if isinstance(obj, Path):
        return str(obj)
    raise TypeError(f"cannot write {type(obj).__name__} as JSON")


def write_json(path: Path, obj: Any) -> None:
    """Write `json_ready` of ``obj`` to ``path``, keys in their order, floats with all digits."""
    text = json.dumps(json_ready(obj), indent=2, ensure_ascii=False, allow_nan=False)
    write_whole(path, f"{text}\n".encode())
