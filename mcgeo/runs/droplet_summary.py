"""The numbers of one sampled droplet: what ``sample`` prints and hands on."""

from __future__ import annotations

from typing import Any

from mcgeo.runs.droplet import Droplet
from mcgeo.runs.run_summary import run_summary
from mcgeo.states.droplet import mean_square_radius


def droplet_summary(droplet: Droplet) -> dict[str, Any]:
    """The JSON object of ``sample`` for a droplet; energies per electron, Coulomb."""
    energies = droplet.energies
    xx, yy, xy = droplet.second_moments
    return {
        "state": droplet.state_summary(),
        "interaction": "Coulomb",
        "energy_disk": {
            **energies.total.as_dict(),
            "electron_electron": energies.electron_electron.value,
            "electron_electron_error": energies.electron_electron.error,
            "electron_background": energies.electron_background.value,
            "electron_background_error": energies.electron_background.error,
            "background_background": energies.background_background.value,
            "electron_electron_lab": energies.electron_electron_lab.value,
            "electron_electron_lab_error": energies.electron_electron_lab.error,
        },
        "second_moments": {"xx": xx.as_dict(), "yy": yy.as_dict(), "xy": xy.as_dict()},
        "mean_square_radius_exact": mean_square_radius(droplet.state),
        **run_summary(droplet),
        "diagnostics": droplet.diagnostics_summary(),
    }
