"""The interactions by name.

To add one: a class with the members of `Interaction` (`PairPotential` and `IsotropicPotential` supply most of them),
one line in `INTERACTIONS`, one model in the configuration.
"""

from __future__ import annotations

from collections.abc import Callable

from mcgeo.problem.combination import Combination
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.dipole import Dipole
from mcgeo.problem.finite_width import FangHoward, GaussianWell, Softened, SquareWell
from mcgeo.problem.gaussian import Gaussian
from mcgeo.problem.pair_potential import Interaction
from mcgeo.problem.power_law import PowerLaw
from mcgeo.problem.pseudopotential_sum import PseudopotentialSum
from mcgeo.problem.screened import OneGate, TwoGates, Yukawa
from mcgeo.problem.table import tabulated

__all__ = ["INTERACTIONS", "Coulomb", "Gaussian", "Interaction"]

# Kind -> what makes the interaction of its parameters, by their names.
INTERACTIONS: dict[str, Callable[..., Interaction]] = {
    "coulomb": Coulomb,
    "gaussian": Gaussian,
    "yukawa": Yukawa,
    "one_gate": OneGate,
    "two_gates": TwoGates,
    "square_well": SquareWell,
    "fang_howard": FangHoward,
    "gaussian_well": GaussianWell,
    "softened": Softened,
    "power_law": PowerLaw,
    "dipole": Dipole,
    "pseudopotentials": PseudopotentialSum,
    "table": tabulated,
    "sum": Combination,
}
