"""``plot``."""
import argparse


def run_plot(arguments: argparse.Namespace) -> tuple[str, int]:
    return "", 0
