"""``liquids``: what the catalogue holds."""

from __future__ import annotations

import argparse

from mcgeo.commands.run import CONVERGED_CODE, Answer, as_json
from mcgeo.report.catalogue_text import liquids_text
from mcgeo.runs.catalogue_summary import catalogue_rows


def run_liquids(arguments: argparse.Namespace) -> Answer:
    """``mcgeo liquids``."""
    rows = catalogue_rows()
    return as_json({"liquids": rows}) if arguments.json else liquids_text(rows), CONVERGED_CODE
