"""Trial states by their key in the configuration: one line per state."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.states.base import TrialState
from mcgeo.states.droplet import DropletState
from mcgeo.states.fermi_sea import FermiSea
from mcgeo.states.laughlin import Laughlin
from mcgeo.states.laughlin_droplet import LaughlinDroplet
from mcgeo.states.moore_read import MooreRead
from mcgeo.states.moore_read_droplet import MooreReadDroplet

_PFAFFIAN_SECTORS = (1, 2, 3)

StateMaker = Callable[[Mapping[str, Any], TorusFrame], list[TrialState]]

# From the resolved ``state`` keys to the states whose average is the liquid: one, or one per sector of the torus.
TORUS_STATES: dict[str, StateMaker] = {
    "laughlin": lambda keys, frame: [Laughlin(keys["exponent"], keys["electrons"], frame)],
    "moore_read": lambda keys, frame: [
        MooreRead(Fraction(keys["filling"]).denominator, keys["electrons"], frame, sector)
        for sector in (_PFAFFIAN_SECTORS if keys["sector"] == "all" else (keys["sector"],))
    ],
    "fermi_sea": lambda keys, frame: [
        FermiSea(Fraction(keys["filling"]).denominator, keys["electrons"], frame, keys["points"])
    ],
}

DropletMaker = Callable[[Mapping[str, Any], UnimodularMetric], DropletState]

DROPLET_STATES: dict[str, DropletMaker] = {
    "laughlin": lambda keys, metric: LaughlinDroplet(keys["exponent"], keys["electrons"], metric),
    "moore_read": lambda keys, metric: MooreReadDroplet(
        Fraction(keys["filling"]).denominator, keys["electrons"], metric
    ),
}
