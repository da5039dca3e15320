"""Coulomb energies of the Moore-Read states on small tori.

Tables: energies of the zero modes of the three-body parent Hamiltonians (Greiter, Wen and Wilczek, Nucl. Phys. B 374,
567 (1992)), exact, by diagonalisation in second quantisation computed independently of this package.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import pytest

from mcgeo.kernels import moore_read_pairs
from mcgeo.problem.interaction import Coulomb
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import sample
from mcgeo.states import moore_read
from tests.physics.checks import LARGEST_Z, require_unit_pulls

PfaffianSampler = Callable[..., Liquid]

# Filling, number of particles, energies in the sectors 1, 2, 3. On the square with metric diag(2, 1/2) the sectors are
# those of the cell's short side L1 along y, tau = 2i.
SQUARE = [
    ("1/2", 4, (-0.4536042, -0.48144924, -0.4536042)),
    ("1/2", 6, (-0.46448007, -0.45515692, -0.46448007)),
    ("1", 4, (-0.45655487, -0.50523763, -0.45655487)),
    ("1", 6, (-0.46303197, -0.45737965, -0.46303197)),
]
HEXAGONAL = [
    ("1/2", 4, (-0.4677485,) * 3),
    ("1/2", 6, (-0.45951529,) * 3),
    ("1", 4, (-0.47502571,) * 3),
    ("1", 6, (-0.45899582,) * 3),
]
STRETCHED_SQUARE = [
    ("1/2", 4, (-0.43883223, -0.46081473, -0.45525680)),
    ("1/2", 6, (-0.42828629, -0.45281726, -0.45811506)),
    ("1", 4, (-0.46719717, -0.46976177, -0.46412660)),
    ("1", 6, (-0.41702774, -0.46225045, -0.46591417)),
]


@pytest.fixture(scope="module")
def pfaffian(tmp_path_factory: pytest.TempPathFactory) -> PfaffianSampler:
    """``pfaffian(filling, electrons, sector, shape, stretch)``: sampled as a user's run does."""

    def liquid(
        filling: str, electrons: int, sector: int | str, shape: str = "square", stretch: float = 0.0, seed: int = 1
    ) -> Liquid:
        config = config_from_resolved(
            {
                "state": {
                    "kind": "moore_read",
                    "filling": filling,
                    "electrons": electrons,
                    "sector": sector,
                    "metric": {"stretch": stretch},
                },
                "cell": {"shape": shape},
                "sampling": {
                    "walkers": 32,
                    "sweeps": 800,
                    "blocks": 8,
                    "equilibration": 100,
                    "seed": seed,
                    "threads": 1,
                },
            }
        )
        result = sample(config, tmp_path_factory.mktemp("pfaffian"), quiet=True)
        assert isinstance(result, Liquid)
        return result

    return liquid


def pull(liquid: Liquid, exact: float) -> float:
    energy = liquid.torus_energy(Coulomb())
    assert energy.error < (1e-3 if liquid.states[0].statistics == "fermions" else 4e-3)
    return (energy.value - exact) / energy.error


@pytest.mark.parametrize(
    ("shape", "gamma", "table"),
    [("square", 1.0, SQUARE), ("hexagonal", 1.0, HEXAGONAL), ("square", 2.0, STRETCHED_SQUARE)],
)
def test_energies_of_all_sectors(
    pfaffian: PfaffianSampler, shape: str, gamma: float, table: list[tuple[str, int, tuple[float, float, float]]]
) -> None:
    require_unit_pulls(
        [
            pull(pfaffian(filling, electrons, sector, shape, math.log(gamma), seed=sector), exact)
            for filling, electrons, energies in table
            for sector, exact in zip((1, 2, 3), energies, strict=True)
        ]
    )


def test_liquid_of_all_sectors_is_their_average(pfaffian: PfaffianSampler) -> None:
    _, electrons, energies = STRETCHED_SQUARE[1]
    require_unit_pulls([pull(pfaffian("1/2", electrons, "all", stretch=math.log(2.0)), sum(energies) / 3.0)])


def test_sectors_taken_for_one_another_are_noticed(pfaffian: PfaffianSampler) -> None:
    _, electrons, energies = SQUARE[1]
    assert abs(pull(pfaffian("1/2", electrons, 1), energies[1])) > 2.0 * LARGEST_Z


def test_pairing_function_of_the_wrong_modulus_is_noticed(
    pfaffian: PfaffianSampler, monkeypatch: pytest.MonkeyPatch
) -> None:
    def twisted(exponent: int, sector: int, tau: complex, side: float) -> moore_read_pairs.MooreReadTorusTables:
        good = moore_read_pairs.moore_read_torus_tables(exponent, sector, tau, side)
        return good._replace(numerator=moore_read_pairs.moore_read_torus_tables(1, sector, tau + 0.3j, side).numerator)

    monkeypatch.setattr(moore_read, "moore_read_torus_tables", twisted)
    filling, electrons, energies = SQUARE[0]
    assert abs(pull(pfaffian(filling, electrons, 2), energies[1])) > 2.0 * LARGEST_Z
