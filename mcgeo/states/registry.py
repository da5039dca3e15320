"""Trial states by their key in the configuration: one line per state."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

from mcgeo.geometry.frame import TorusFrame
from mcgeo.states.base import TrialState
from mcgeo.states.fermi_sea import FermiSea
from mcgeo.states.laughlin import Laughlin

StateMaker = Callable[[Mapping[str, Any], TorusFrame], list[TrialState]]

# From the resolved ``state`` keys to the states whose average is the liquid: one, or one per sector of the torus.
TORUS_STATES: dict[str, StateMaker] = {
    "laughlin": lambda keys, frame: [Laughlin(keys["exponent"], keys["electrons"], frame)],
    "fermi_sea": lambda keys, frame: [
        FermiSea(Fraction(keys["filling"]).denominator, keys["electrons"], frame, keys["points"])
    ],
}
