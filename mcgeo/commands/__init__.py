"""One function per command: parsed arguments in, text for standard output and exit code out."""

from mcgeo.commands.describe import run_check, run_info, run_schema
from mcgeo.commands.plot import run_plot
from mcgeo.commands.run import run_sample, run_scan

__all__ = ["run_check", "run_info", "run_plot", "run_sample", "run_scan", "run_schema"]
