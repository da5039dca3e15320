"""Liquids that the physics tests share: each is sampled once, through the path a user's run takes."""

from __future__ import annotations

import pytest

from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import sample
from tests.physics.checks import Sampler


@pytest.fixture(scope="session")
def sampled(tmp_path_factory: pytest.TempPathFactory) -> Sampler:
    """``sampled(exponent, electrons, shape=..., ...)``: the liquid, from memory when asked again."""
    kept: dict[tuple[object, ...], Liquid] = {}

    def liquid(
        exponent: int,
        electrons: int,
        *,
        shape: str | None = "hexagonal",
        tau: complex | None = None,
        stretch: float = 0.0,
        angle_degrees: float = 0.0,
        sweeps: int = 2000,
        walkers: int = 32,
        seed: int = 1,
        measure_every: int | None = None,
        step: float | None = None,
    ) -> Liquid:
        size = (exponent, electrons, shape, tau, stretch, angle_degrees)
        key = (*size, sweeps, walkers, seed, measure_every, step)
        if key not in kept:
            metric = {"stretch": stretch, "angle_degrees": angle_degrees}
            config = config_from_resolved(
                {
                    "state": {
                        "kind": "laughlin",
                        "exponent": exponent,
                        "electrons": electrons,
                        "metric": metric,
                    },
                    "cell": {"shape": shape} if tau is None else {"tau": [tau.real, tau.imag]},
                    "sampling": {
                        "walkers": walkers,
                        "sweeps": sweeps,
                        "blocks": 8,
                        "equilibration": 400,
                        "seed": seed,
                        "measure_every": measure_every,
                        "step": step,
                        "threads": 1,
                    },
                }
            )
            kept[key] = sample(config, tmp_path_factory.mktemp("liquid"), quiet=True)
        return kept[key]

    return liquid


@pytest.fixture(scope="session")
def filled(sampled: Sampler) -> Liquid:
    """Filled level, 30 electrons."""
    return sampled(1, 30, sweeps=8000, seed=101)


@pytest.fixture(scope="session")
def third(sampled: Sampler) -> Liquid:
    """Laughlin 1/3, 37 electrons: the largest run, which most of what follows rests on."""
    return sampled(3, 37, sweeps=12000, seed=103)


@pytest.fixture(scope="session")
def fifth(sampled: Sampler) -> Liquid:
    """Laughlin 1/5, 30 electrons."""
    return sampled(5, 30, sweeps=8000, seed=105)


@pytest.fixture(scope="session")
def bosons(sampled: Sampler) -> Liquid:
    """Bosonic Laughlin 1/2, 30 particles."""
    return sampled(2, 30, sweeps=8000, seed=102)
