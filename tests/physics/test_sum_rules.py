"""Sum rules of S(q) and of the pair occupations, and the fit that leads from one to the other."""

from __future__ import annotations

import dataclasses
import math
from types import SimpleNamespace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.estimate.occupations import PairOccupations, fit_occupations
from mcgeo.estimate.pair_correlation import bulk_radial_pair_correlation, counted_pair_correlation
from mcgeo.estimate.statistics import jackknife_error, jackknife_means, mean_estimate
from mcgeo.estimate.structure_factor import shell_means
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.sampling.measurement import BIN_WIDTH, PAIRS
from mcgeo.states.base import BOSONS
from mcgeo.states.laughlin import Laughlin
from mcgeo.variational.energy_surface import EnergySurface
from tests.physics.checks import require_agreement, require_unit_pulls
from tests.physics.closed_forms import small_q_coefficients

NAMES = {"filled": 1, "bosons": 2, "third": 3, "fifth": 5}

# c_m at 1/3, m = 1, 3, 5, ...: Girvin, MacDonald and Platzman, Phys. Rev. B 33, 2481 (1986), table I (from
# memory; the digits satisfy all three sum rules).
PUBLISHED_1986 = np.array(
    [-1.0, 0.51053, -0.02056, 0.31003, -0.4905, 0.20102, -0.00904, -0.00148, 0.0, 0.0012, 0.0006, -0.0018]
)

# S(q) at 1/3 on waves of square and hexagonal tori of up to 8 electrons, by exact diagonalisation computed
# independently of this package.
BULK_TABLE = np.array(
    [
        (0.51166, 0.13939), (0.54982, 0.16232), (0.58778, 0.18734), (0.72360, 0.29407), (0.95231, 0.53620),
        (1.01807, 0.6176), (1.09964, 0.7219), (1.22311, 0.8742), (1.44720, 1.0674), (1.55512, 1.1062),
        (1.61802, 1.1127), (1.76334, 1.0990), (1.97220, 1.0569), (2.19927, 1.0179), (2.35112, 1.0046),
    ]
)  # fmt: skip


def structure_of(coefficients: NDArray[np.float64], norm: NDArray[np.float64]) -> NDArray[np.float64]:
    """S(q) of fermions at 1/3 from c_1, c_3, ... along the last axis, written out anew."""
    m = 1 + 2 * np.arange(coefficients.shape[-1])
    laguerre = eval_laguerre(m[:, None], norm**2) * np.exp(-(norm**2))
    return 1.0 - np.exp(-(norm**2) / 2.0) / 3.0 + 4.0 / 3.0 * coefficients @ laguerre


def series(occupations: PairOccupations, exponent: int) -> NDArray[np.float64]:
    """Coefficients of q^0, q^2, q^4, q^6 in S(q) of every sample, shape (n_samples, 4).

    L_m(x) exp(-x) = sum_k (-x)^k (m+k)!/(m! k!^2).
    """
    m = occupations.m.astype(float)
    rising = np.stack([np.ones_like(m), m + 1, (m + 1) * (m + 2), (m + 1) * (m + 2) * (m + 3)])
    k = np.arange(4)
    factorial_sq = np.array([1.0, 1.0, 4.0, 36.0])
    sign = -1.0 if exponent % 2 else 1.0
    orbit = sign / exponent * (-0.5) ** k / np.sqrt(factorial_sq)
    terms = rising * ((-1.0) ** k / factorial_sq)[:, None]
    return 4.0 / exponent * occupations.samples @ terms.T + orbit + (k == 0)


@pytest.mark.parametrize(
    ("name", "largest"), [("filled", 0.9), ("bosons", 0.75), ("third", 0.55), ("fifth", 0.5)]
)
def test_measured_waves_start_as_screening_and_compressibility_say(
    request: pytest.FixtureRequest, name: str, largest: float
) -> None:
    liquid = request.getfixturevalue(name)
    curve = shell_means(liquid.norm, liquid.structure_samples, 0.0)
    few = curve.x < largest
    assert few.sum() >= 2
    second, fourth, sixth = small_q_coefficients(NAMES[name])
    value, error, q_sq = curve.value[few], curve.error[few], curve.x[few] ** 2
    require_agreement(value, error, second * q_sq + fourth * q_sq**2 + sixth * q_sq**3)
    # The compressibility of the next exponent must not pass.
    with pytest.raises(AssertionError):
        require_agreement(value, error, second * q_sq + (fourth + 0.125) * q_sq**2 + sixth * q_sq**3)


@pytest.mark.parametrize("name", NAMES)
def test_every_sample_obeys_the_imposed_rules(request: pytest.FixtureRequest, name: str) -> None:
    exponent = NAMES[name]
    found = series(request.getfixturevalue(name).occupations, exponent)
    second, fourth, _ = small_q_coefficients(exponent)
    # The sums weigh c_m by up to 2000, which sets the rounding of an ill-conditioned fit.
    assert found[:, :3] == pytest.approx(np.tile([0.0, second, fourth], (len(found), 1)), abs=3e-6)


@pytest.mark.parametrize(("name", "sums"), [("third", (-0.5, -0.25, 0.5)), ("fifth", (-1.0, -0.5, 2.0))])
def test_sums_over_occupations(
    request: pytest.FixtureRequest, name: str, sums: tuple[float, float, float]
) -> None:
    # (1 - 1/nu)/4, (1 - 1/nu)/8, (1 - 1/nu)^2/8: Girvin, MacDonald and Platzman (1986), section IV.
    occupations = request.getfixturevalue(name).occupations
    m, c = occupations.m, occupations.coefficients
    assert [c.sum(), c @ (m + 1), c @ ((m + 1) * (m + 2))] == pytest.approx(sums, abs=1e-5)


@pytest.mark.parametrize("name", NAMES)
def test_sixth_moment_which_the_fit_does_not_know(request: pytest.FixtureRequest, name: str) -> None:
    exponent = NAMES[name]
    sixth = mean_estimate(series(request.getfixturevalue(name).occupations, exponent)[:, 3])
    require_agreement(sixth.value, sixth.error, small_q_coefficients(exponent)[2])
    if name == "filled":
        # The moment of exponent 7 must not pass.
        with pytest.raises(AssertionError):
            require_agreement(sixth.value, sixth.error, small_q_coefficients(7)[2])


def test_structure_factor_of_the_bulk_at_one_third(third: Liquid) -> None:
    norm, exact = BULK_TABLE.T
    samples = structure_of(third.occupations.samples, norm)
    error = samples.std(axis=0, ddof=1) / math.sqrt(len(samples))
    # The table's own finite-size effect is 1e-3.
    require_agreement(samples.mean(axis=0), error, exact, 1e-3)
    assert np.all(error < 1e-3)
    guiding_centres = third.occupations.guiding_centre_structure(norm)
    dressed = 1.0 + np.exp(-0.5 * norm**2) * (guiding_centres - 1.0)
    assert dressed == pytest.approx(samples.mean(axis=0), abs=1e-12)


def test_published_occupations_at_one_third(third: Liquid) -> None:
    # Single occupations of 1986 are good to about 1e-2.
    q = np.linspace(0.2, 4.0, 30)
    published = structure_of(PUBLISHED_1986, q)
    assert structure_of(third.occupations.coefficients, q) == pytest.approx(published, abs=1.5e-2)
    n_1, n_3 = (third.occupations.occupation(index) for index in (0, 1))
    assert n_1.value == 0.0
    assert n_3.value == pytest.approx(1.0 + PUBLISHED_1986[1], abs=0.05)


@pytest.mark.parametrize("name", ["bosons", "third", "fifth"])
def test_pairs_below_the_exponent_are_absent(request: pytest.FixtureRequest, name: str) -> None:
    liquid, exponent = request.getfixturevalue(name), NAMES[name]
    below = liquid.occupations.m < exponent
    assert below.any()
    assert np.abs(1.0 + liquid.occupations.samples[:, below]).max() < 1e-14
    # A fit that is not told so finds it in the data.
    state = liquid.states[0]
    keys = ("label", "filling", "statistics", "shift", "frame")
    untold = SimpleNamespace(first_occupied=exponent % 2, **{key: getattr(state, key) for key in keys})
    lowest = fit_occupations(untold, liquid.norm, liquid.structure_samples).occupation(0)
    require_agreement(lowest.value, lowest.error, 0.0, 1e-3)
    assert lowest.error < 0.01


@pytest.mark.parametrize("name", ["bosons", "third", "fifth"])
def test_pairs_counted_directly_follow_the_occupations(request: pytest.FixtureRequest, name: str) -> None:
    liquid = request.getfixturevalue(name)
    counts = liquid.independent(liquid.blocks.counts[PAIRS].astype(float))
    configurations = liquid.configurations_per_count
    counted = counted_pair_correlation(liquid.frame, liquid.n_electrons, BIN_WIDTH, counts, configurations)
    plane = bulk_radial_pair_correlation(liquid.occupations, counted.x)
    # Bins with at least some 20 pairs; a bin's mean differs from its middle by less than the tolerance.
    filled = counts.sum(axis=0) > 20
    error = np.hypot(counted.error, plane.error)
    require_agreement(counted.value[filled], error[filled], plane.value[filled], 2e-3)
    # Near contact g is (2/m!) (r^2/4)^m n_m: hardly a pair, and the curve itself says so.
    assert counted.value[counted.x < 0.5].max() < 0.05


def synthetic(electrons: int) -> tuple[Laughlin, NDArray[np.float64], NDArray[np.float64]]:
    """State, lengths of waves and S(q) of the published occupations."""
    frame = TorusFrame.of(Cell.from_shape("hexagonal", 3 * electrons))
    norm = np.hypot(*frame.waves(8.0).vectors.T)
    return Laughlin(3, electrons, frame), norm, structure_of(PUBLISHED_1986, norm)


def test_fit_returns_known_occupations_with_calibrated_errors() -> None:
    state, norm, exact = synthetic(37)
    # |rho_q|^2 is nearly exponential: its standard deviation is its mean.
    n_fits, n_samples, n_effective = 100, 128, 4e6
    rng = np.random.default_rng(20)
    scatter = exact * math.sqrt(n_samples / n_effective)
    coulomb = [math.gamma(m + 0.5) / math.factorial(m) for m in range(1, 24, 2)]
    # Haldane's pseudopotentials Gamma(m + 1/2)/(2 m!): E = nu (-sqrt(pi/8) + sum 2 c_m V_m).
    exact_energy = (-math.sqrt(math.pi / 8.0) + PUBLISHED_1986 @ coulomb) / 3.0
    pulls, energy_pulls = [], []
    for _ in range(n_fits):
        noisy = exact + scatter * rng.standard_normal((n_samples, len(exact)))
        occupations = fit_occupations(state, norm, noisy)
        some = occupations.samples[:, 1:10]
        pulls.append((some.mean(axis=0) - PUBLISHED_1986[1:10]) / jackknife_error(jackknife_means(some)))
        energy = mean_estimate(energies(occupations))
        energy_pulls.append((energy.value - exact_energy) / energy.error)
    for column in np.transpose(pulls):
        require_unit_pulls(column)
    require_unit_pulls(energy_pulls)
    # Errors a third too small would be seen.
    with pytest.raises(AssertionError):
        require_unit_pulls(1.5 * np.array(energy_pulls))


def energies(occupations: PairOccupations) -> NDArray[np.float64]:
    return EnergySurface(occupations, Problem(ISOTROPIC, Coulomb())).sample_energies(ISOTROPIC)


def test_wrong_statistics_are_seen(third: Liquid) -> None:
    # With the sign of e reversed the background would be repelled by itself.
    wrong = mean_estimate(energies(dataclasses.replace(third.occupations, statistics=BOSONS)))
    with pytest.raises(AssertionError):
        require_agreement(wrong.value, wrong.error, -0.4098, 1e-4)
