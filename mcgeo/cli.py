"""The command line: results on standard output, everything else on standard error.

Imports of the numerical libraries wait until a command needs them, so that ``--help`` answers at once.
"""

from __future__ import annotations

import argparse
import importlib
import logging
import os
import sys
from collections.abc import Sequence
from pathlib import Path

from mcgeo import __version__
from mcgeo.errors import McgeoError

_EXIT_CODES = """exit codes:
  0 done, 2 usage or configuration, 3 finished but not converged,
  4 some points of a sweep failed or are missing, or its workers or scheduler were lost,
  130 or 143 interrupted (whole blocks are kept), 1 a bug
"""


_FIGURES = ["hole", "energy", "structure", "correlation", "occupations", "density", "trace"]
_SWEEP_FIGURES = ["sweep", "map", "aspects"]
_MODULES = {
    "sample": "run",
    "scan": "scan",
    "sweep": "sweep",
    "plot": "plot",
    "check": "describe",
    "liquids": "liquids",
    "info": "describe",
    "schema": "describe",
}


def build_parser() -> argparse.ArgumentParser:
    """All commands and options."""
    parser = argparse.ArgumentParser(
        prog="mcgeo",
        description="The shape of the correlation hole of anisotropic fractional quantum Hall liquids.",
        epilog=_EXIT_CODES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"mcgeo {__version__}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")

    sample = _command(commands, "sample", "run the walkers, write one result file", "mcgeo sample well.yaml")
    _add_run_options(sample)
    sample.add_argument(
        "--extend", type=_positive, metavar="SWEEPS", help="make the finished run longer by whole blocks of its own"
    )
    scan = _command(
        commands, "scan", "energy over the metric, its minimum, stiffness and response", "mcgeo scan well.yaml --json"
    )
    _add_run_options(scan)
    scan.add_argument("--liquid", type=Path, metavar="FILE", help="take this sampled liquid instead of sampling")

    scan.add_argument(
        "--compare", action="store_true", help="energies of both roads, plane and torus, and their difference"
    )

    _add_sweep(commands)

    plot = _command(commands, "plot", "draw one figure from a result file", "mcgeo plot hole well_results/liquid.h5")
    plot.add_argument("what", choices=[*_FIGURES, *_SWEEP_FIGURES])
    plot.add_argument(
        "file", type=Path, metavar="FILE",
        help="result file, a folder that holds one or a sweep, or a configuration of a catalogue liquid",
    )  # fmt: skip
    plot.add_argument("--problem", type=Path, metavar="CONFIG", help="problem and scan of this file instead")
    _add_allow_outside(plot)
    plot.add_argument("--out", type=Path, metavar="DIR", help="where figures go (default: beside the file)")
    plot.add_argument("--format", action="append", choices=["pdf", "svg", "png"], help="repeatable (default: pdf, png)")
    of_sweep = plot.add_argument_group("figures of a sweep (sweep, map, aspects)")
    of_sweep.add_argument("--quantity", metavar="NAME", help="column of the table (default: stretch)")
    of_sweep.add_argument("--along", metavar="KEY", help="swept key of the horizontal axis")
    of_sweep.add_argument("--families", metavar="KEY", help="swept key of the lines, or of the map's vertical axis")
    of_sweep.add_argument("--at", action="append", metavar="KEY=VALUE", help="fix another swept key, repeatable")

    check = _command(commands, "check", "validate a configuration, show the plan and its cost", "mcgeo check well.yaml")
    check.add_argument("config", type=Path, metavar="CONFIG")
    _add_allow_outside(check)
    check.add_argument("--json", action="store_true", help="one JSON object on standard output")

    liquids = _command(commands, "liquids", "the catalogue: liquids that need no sampling", "mcgeo liquids")
    liquids.add_argument("--json", action="store_true", help="one JSON object on standard output")

    info = _command(commands, "info", "versions and machine, to go with a report", "mcgeo info")
    info.add_argument("--json", action="store_true", help="one JSON object on standard output")
    _command(commands, "schema", "JSON schema of the configuration, for editors", "mcgeo schema > mcgeo.schema.json")
    return parser


def _add_sweep(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    sweep = _command(commands, "sweep", "every point of a grid of configurations", "mcgeo sweep wells.yaml --workers 4")
    sweep.add_argument("config", type=Path, metavar="CONFIG", help="YAML configuration with the key sweep")
    _add_allow_outside(sweep)
    sweep.add_argument("--out", type=Path, metavar="DIR", help="folder of the sweep (default: NAME_sweep here)")
    sweep.add_argument("--workers", type=_positive, metavar="N", help="processes (default: all cores allowed)")
    sweep.add_argument(
        "--scheduler", metavar="WHERE", help="workers of a dask cluster instead: tcp://HOST:PORT, or a scheduler file"
    )
    sweep.add_argument(
        "--threads",
        type=_positive,
        metavar="N",
        help="threads of every sampling (default: cores shared out; 1 on a cluster)",
    )
    sweep.add_argument("--shard", metavar="I/N", help="only the I-th of N parts, for a job of an array; then --gather")
    sweep.add_argument(
        "--gather",
        type=Path,
        nargs="*",
        metavar="DIR",
        help="run nothing: make the tables, bringing rows and liquids from these folders to that of --out",
    )
    sweep.add_argument("--retry", action="store_true", help="try points again that have failed before")
    sweep.add_argument(
        "--status", action="store_true", help="how far the sweep of CONFIG, or in the folder CONFIG, is"
    )
    sweep.add_argument("--json", action="store_true", help="one JSON object on standard output")
    sweep.add_argument("-q", "--quiet", action="store_true", help="no progress on standard error")


def _command(
    commands: argparse._SubParsersAction[argparse.ArgumentParser], name: str, summary: str, example: str
) -> argparse.ArgumentParser:
    return commands.add_parser(
        name,
        help=summary,
        description=f"{summary[0].upper()}{summary[1:]}.",
        epilog=f"example:\n  {example}\n\n{_EXIT_CODES}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )


def _positive(text: str) -> int:
    value = int(text)
    if value < 1:
        raise argparse.ArgumentTypeError(f"must be at least 1, not {value}")
    return value


def _add_run_options(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("config", type=Path, metavar="CONFIG", help="YAML configuration, or a result file")
    _add_allow_outside(parser)
    parser.add_argument("--out", type=Path, metavar="DIR", help="folder of the results (default: NAME_results here)")
    parser.add_argument("--threads", type=_positive, metavar="N", help="threads (default: all cores allowed)")
    parser.add_argument("--overwrite", action="store_true", help="replace a liquid of another configuration")
    parser.add_argument("--json", action="store_true", help="one JSON object on standard output")
    parser.add_argument("-q", "--quiet", action="store_true", help="no progress on standard error")


def _add_allow_outside(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--allow-outside", action="store_true", help="files named in the configuration may lie outside its folder"
    )


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code."""
    arguments = build_parser().parse_args(argv)
    if getattr(arguments, "quiet", False):
        # The notice that kernels are compiled is progress too.
        logging.getLogger("mcgeo.kernels").setLevel(logging.ERROR)
    try:
        module = importlib.import_module(f"mcgeo.commands.{_MODULES[arguments.command]}")
        text, code = getattr(module, f"run_{arguments.command}")(arguments)
    except McgeoError as fault:
        print(fault, file=sys.stderr)
        return fault.exit_code
    except OSError as fault:
        where, why = fault.filename or "output", fault.strerror or fault
        print(f"{where}: {why}; choose another place with --out", file=sys.stderr)
        return 2
    except MemoryError:
        print("not enough memory for this; lower electrons, walkers, blocks or points", file=sys.stderr)
        return 2
    except KeyboardInterrupt:
        print("interrupted", file=sys.stderr)
        return 130
    try:
        print(text, flush=True)
    except BrokenPipeError:
        # The reader has gone; point standard output elsewhere so that the interpreter's own flush is quiet.
        _discard_output()
    except OSError as fault:
        print(f"standard output: {fault.strerror or fault}", file=sys.stderr)
        _discard_output()
        return 2
    return int(code)


def _discard_output() -> None:
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
