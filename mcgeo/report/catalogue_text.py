"""Lines about liquids of the catalogue: where their numbers come from, and what there is."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from mcgeo.estimate.statistics import Estimate
from mcgeo.report.numbers import value_with_error


def origin_text(state: Mapping[str, Any]) -> str:
    """Where the numbers of a catalogue liquid come from, in one line."""
    large, small = state["origin"]["large"], state["origin"]["small"]
    return (
        f"catalogue {state['catalogue']}: {_run_words(large)}; finite-size error: "
        f"difference to {_run_words(small)}"
    )


def _run_words(run: Mapping[str, Any]) -> str:
    return (
        f"{run['electrons']} electrons, {run['walkers']} walkers of {run['sweeps']} sweeps, seed {run['seed']}, "
        f"mcgeo {run['mcgeo_version']}, {run['verdict']}"
    )


def origin_rows(summary: Mapping[str, Any]) -> list[tuple[str, str]]:
    """For a liquid of the catalogue, in place of a run's health."""
    parts = summary["optimum"]["error_parts"]
    rows = [
        (f"error of the {name}", f"{part['statistical']:.2g} statistical, {part['finite_size']:.2g} finite size")
        for name, part in ((name, parts[f"{name}_error"]) for name in ("stretch", "energy"))
        if math.isfinite(part["finite_size"])
    ]
    large, small = summary["state"]["origin"]["large"], summary["state"]["origin"]["small"]
    return [*rows, ("sampled", _run_words(large)), ("compared with", _run_words(small))]


def liquids_text(rows: Sequence[Mapping[str, Any]]) -> str:
    """The catalogue as a table."""
    head = ("catalogue", "filling", "particles", "electrons", "energy", "statistical", "finite size")
    lines = [
        (
            row["catalogue"],
            row["filling"],
            row["statistics"],
            f"{row['origin']['large']['electrons']}, {row['origin']['small']['electrons']}",
            value_with_error(Estimate(row["energy_plane"]["value"], row["energy_plane"]["error"])),
            f"{row['energy_plane']['error_parts']['statistical']:.1e}",
            f"{row['energy_plane']['error_parts']['finite_size']:.1e}",
        )
        for row in rows
    ]
    widths = [max(len(line[column]) for line in (head, *lines)) for column in range(len(head))]
    cells = [[cell.ljust(width) for cell, width in zip(line, widths, strict=True)] for line in (head, *lines)]
    table = ["  ".join(line).rstrip() for line in cells]
    explained = (
        "energy: Coulomb, level 0, isotropic hole, infinite liquid, in e^2/(4 pi eps l_B) per particle; its error\n"
        "holds the statistical one and the difference between the two numbers of electrons. In a configuration:\n"
        "state: {catalogue: laughlin-1/3}, with conjugate: true for the hole conjugate of fermions below filling 1."
    )
    return "\n".join([*table, "", explained])
