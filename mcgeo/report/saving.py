"""Figures as files, with the numbers behind them."""

from __future__ import annotations

import io
import logging
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from matplotlib.figure import Figure
from numpy.typing import ArrayLike

from mcgeo.report.style import styled
from mcgeo.report.tables import csv_bytes
from mcgeo.runs.atomic import write_whole

# The font library warns of the missing time stamps that make files reproducible.
logging.getLogger("fontTools").setLevel(logging.ERROR)

# Where each format keeps free text, and its time stamp; without the stamp the same figure gives the same bytes.
_PROVENANCE_KEY = {"pdf": "Subject", "svg": "Description", "png": "Description"}
_TIME_KEY = {"pdf": "CreationDate", "svg": "Date"}


def provenance(metadata: Mapping[str, str]) -> str:
    """``key: value; key: value``."""
    return "; ".join(f"{key}: {value}" for key, value in metadata.items())


def _settle_layout(figure: Figure) -> None:
    """Lay out once: the engine moves axes a little at every drawing, and with the resolution."""
    figure.draw_without_rendering()
    figure.set_layout_engine("none")


@styled
def figure_bytes(figure: Figure, kind: str, metadata: Mapping[str, str]) -> bytes:
    """The figure as ``pdf``, ``png`` or ``svg``: real text, provenance inside, no time stamp; its layout is settled.

    Raises
    ------
    ValueError
        If the format is another one.
    """
    if kind not in _PROVENANCE_KEY:
        raise ValueError(f"figures are written as {', '.join(sorted(_PROVENANCE_KEY))}, not {kind!r}")
    entries: dict[str, Any] = {_PROVENANCE_KEY[kind]: provenance(metadata)}
    if kind in _TIME_KEY:
        entries[_TIME_KEY[kind]] = None
    _settle_layout(figure)
    data = io.BytesIO()
    figure.savefig(data, format=kind, metadata=entries)
    return data.getvalue()


def save_figure(
    figure: Figure,
    stem: Path,
    table: Mapping[str, ArrayLike],
    *,
    formats: Sequence[str] = ("pdf", "png", "svg"),
    metadata: Mapping[str, str],
) -> list[Path]:
    """Write ``<stem>.<format>`` and the numbers as ``<stem>.csv``.

    Everything is rendered before the first file is written, and every file appears whole.

    Parameters
    ----------
    figure : Figure
    stem : Path
        Path without its ending; dots in the name stay.
    table : mapping
        Column heading with unit to values, shape (n,); maps by `map_table`.
    formats : sequence of str
        From ``pdf``, ``png``, ``svg``.
    metadata : mapping
        Provenance (configuration, seed, version), put into every file.

    Returns
    -------
    list of Path
        In the order of ``formats``, the table last.

    Raises
    ------
    ValueError
        For an unknown format or a column that is not one-dimensional.
    OSError
        If the folder cannot be written.
    """
    contents = {kind: figure_bytes(figure, kind, metadata) for kind in formats}
    contents["csv"] = csv_bytes(table, provenance(metadata))
    paths = []
    for ending, data in contents.items():
        paths.append(stem.with_name(f"{stem.name}.{ending}"))
        write_whole(paths[-1], data)
    return paths
