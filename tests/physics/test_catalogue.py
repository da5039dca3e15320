"""The shipped catalogue against published energies, closed forms and sum rules, its errors against their definition."""

from __future__ import annotations

import dataclasses
import math
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from mcgeo.estimate.statistics import jackknife_error, jackknife_means, mean_estimate, samples_with_deviation
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.catalogue import CatalogueLiquid, catalogue_liquid
from mcgeo.runs.catalogue_file import CatalogueEntry, CatalogueRun, read_entry, write_catalogue
from mcgeo.runs.config import config_from_resolved, resolved
from mcgeo.runs.sample import LIQUID_FILE
from mcgeo.runs.scan import optimum
from mcgeo.runs.state_config import CATALOGUE_NAMES
from mcgeo.variational.energy_surface import EnergySurface
from scripts import make_catalogue
from scripts.make_catalogue import PLANS, PUBLISHED, Size, catalogue_run, faults_of, sampled_size

CONFIG = {"state": {"catalogue": "laughlin-1/3"}, "problem": {"mass": {"ratio": 4.0}}}
PROBLEM = resolved(config_from_resolved(CONFIG))["problem"]


def liquid_of(name: str, *, conjugate: bool = False) -> CatalogueLiquid:
    return catalogue_liquid({"kind": "catalogue", "catalogue": name, "conjugate": conjugate})


def with_samples(entry: CatalogueEntry, change: Any) -> CatalogueEntry:
    """The entry with the samples of both sizes changed."""
    runs = {
        size: dataclasses.replace(run, samples=change(run.samples))
        for size, run in (("large", entry.large), ("small", entry.small))
    }
    return dataclasses.replace(entry, **runs)


def coulomb_energy(liquid: CatalogueLiquid) -> tuple[float, float]:
    found = mean_estimate(EnergySurface(liquid.occupations, Problem(ISOTROPIC, Coulomb())).sample_energies(ISOTROPIC))
    return found.value, found.error


@pytest.mark.parametrize("name", CATALOGUE_NAMES)
def test_runs_have_converged_and_the_energy_is_the_published_one(name: str) -> None:
    """Sources of the energies stand beside them in ``scripts/make_catalogue.py``."""
    entry = read_entry(name)
    assert faults_of(name, entry) == []
    assert entry.large.n_electrons > entry.small.n_electrons
    if name in PUBLISHED and name != "laughlin-1":
        assert len(faults_of(name, with_samples(entry, lambda c: 0.95 * c))) == 1


def test_filled_level_has_the_closed_form() -> None:
    """S = 1 - exp(-q^2/2), so c_m = 0: Jancovici, Phys. Rev. Lett. 46, 386 (1981)."""
    run = read_entry("laughlin-1").large

    def require_closed_form(width: float) -> None:
        curve = run.structure
        pulls = (curve.value - (1.0 - np.exp(-0.5 * curve.x**2 / width))) / curve.error
        assert np.all(np.abs(pulls) < 5.0)
        assert 0.7 < float(np.mean(pulls**2)) < 1.4

    require_closed_form(1.0)
    with pytest.raises(AssertionError):
        require_closed_form(1.01)
    value, error = coulomb_energy(liquid_of("laughlin-1"))
    assert abs(value + math.sqrt(math.pi / 8.0)) < 4.0 * error < 1e-4


@pytest.mark.parametrize("name", CATALOGUE_NAMES)
def test_sum_rules_hold_for_every_sample(name: str) -> None:
    """Neutrality and screening: Girvin, MacDonald and Platzman, Phys. Rev. B 33, 2481 (1986), section IV, for fermions;
    e = +1 for bosons. Laughlin 1/m has no pairs of relative angular momentum below m."""
    liquid = liquid_of(name)
    found, sign = liquid.occupations, -1.0 if liquid.entry.statistics == "fermions" else 1.0
    excess = -(1.0 / float(found.filling) + sign) / 4.0
    for samples in (found.samples, liquid.statistical_occupations.samples):
        m = found.m[: samples.shape[1]]
        np.testing.assert_allclose(samples.sum(axis=1), excess, atol=1e-9)
        np.testing.assert_allclose(samples @ (m + 1.0), 0.5 * excess, atol=1e-7)
        if name.startswith("laughlin"):
            assert np.all(samples[:, m < 1 / found.filling] == -1.0)


@pytest.mark.parametrize("name", ["laughlin-1/3", "fermi_sea-1/2"])
def test_size_of_the_systems_is_in_the_errors(name: str) -> None:
    """The square of every error is that of the walkers plus the square of the difference between both sizes."""
    entry = read_entry(name)
    swapped = dataclasses.replace(entry, large=entry.small, small=entry.large)
    other_size = CatalogueLiquid({"conjugate": False}, swapped).statistical_occupations
    liquid = liquid_of(name)
    kinds = (liquid.occupations, liquid.statistical_occupations, other_size)
    whole, part, there = (optimum(occupations, PROBLEM).minimum for occupations in kinds)
    # The error of a stiffness is that at one metric; the sizes have theirs at their own optima.
    tolerances = {"energy": 0.01, "stretch": 0.01, "gain_isotropic": 0.02, "stiffness_along": 0.2}
    for quantity, tolerance in tolerances.items():
        found, noise, deviating = (getattr(minimum, quantity) for minimum in (whole, part, there))
        assert found.value == pytest.approx(noise.value, abs=1e-9)
        assert found.error == pytest.approx(math.hypot(noise.error, noise.value - deviating.value), rel=tolerance)


def test_deviation_adds_to_errors_in_quadrature() -> None:
    generator = np.random.default_rng(5)
    samples, deviation = generator.normal(size=(62, 3)), np.array([0.3, -0.1, 0.02])
    slopes = generator.normal(size=3)

    def require_quadrature(found: np.ndarray) -> None:
        expected = math.hypot(mean_estimate(samples @ slopes).error, float(deviation @ slopes))
        assert mean_estimate(found @ slopes).error == pytest.approx(expected, rel=1e-12)
        assert jackknife_error(jackknife_means(found @ slopes)) == pytest.approx(expected, rel=1e-12)
        np.testing.assert_allclose(found.mean(axis=0), samples.mean(axis=0), atol=1e-13)

    found = samples_with_deviation(samples, deviation)
    require_quadrature(found)
    with pytest.raises(AssertionError):
        require_quadrature(np.concatenate([samples, found[-2:]]))
    with pytest.raises(ValueError, match="leave no room"):
        samples_with_deviation(np.zeros((63, 3)), deviation)


def test_hole_conjugate() -> None:
    """(1 - nu) E(1 - nu) = nu E(nu) + (1 - 2 nu) E(1): Girvin, Phys. Rev. B 29, 6012 (1984); the shape is the same."""
    for name in ("laughlin-1/3", "laughlin-1/5", "moore_read-1/2"):
        liquid, holes = liquid_of(name), liquid_of(name, conjugate=True)
        nu = Fraction(liquid.entry.filling)
        assert holes.occupations.filling == 1 - nu
        energy, of_holes = coulomb_energy(liquid)[0], coulomb_energy(holes)[0]
        expected = float(nu) * energy - float(1 - 2 * nu) * math.sqrt(math.pi / 8.0)
        assert float(1 - nu) * of_holes == pytest.approx(expected, abs=1e-9)
        stretches = [optimum(found, PROBLEM).minimum.stretch.value for found in (liquid, holes)]
        assert stretches[0] == pytest.approx(stretches[1], abs=1e-7)
        q = holes.structure.x
        far = q > 5.0
        np.testing.assert_allclose(holes.structure.value[far], 1.0, atol=0.05)
        # At filling 1/2 holes are as electrons are.
        if 2 * nu == 1:
            np.testing.assert_allclose(holes.structure.value, liquid.structure.value, rtol=1e-12)


@pytest.fixture(scope="module")
def small_run(tmp_path_factory: pytest.TempPathFactory) -> tuple[Any, CatalogueRun]:
    folder = tmp_path_factory.mktemp("run")
    liquid = sampled_size(PLANS["laughlin-1/3"].state, Size(10, 480, 100), 7, folder, 1)
    return liquid, catalogue_run(liquid, folder / LIQUID_FILE)


def test_optimum_is_that_of_the_result_file(small_run: tuple[Any, CatalogueRun], tmp_path: Path) -> None:
    liquid, run = small_run
    found = liquid.occupations
    entry = CatalogueEntry(found.label, str(found.filling), found.statistics, run, run)
    write_catalogue(tmp_path / "made.h5", {"laughlin-1/3": entry})
    kept = CatalogueLiquid({"conjugate": False}, read_entry("laughlin-1/3", tmp_path / "made.h5"))
    mine, theirs = optimum(kept, PROBLEM).minimum, optimum(liquid, PROBLEM).minimum
    for quantity in ("stretch", "energy", "gain_isotropic", "stiffness_along"):
        one, other = getattr(mine, quantity), getattr(theirs, quantity)
        assert one.value == pytest.approx(other.value, abs=1e-10)
        assert one.error == pytest.approx(other.error, rel=0.4)
    assert kept.diagnostics_summary() == liquid.diagnostics_summary()


def test_script_makes_keeps_and_refuses(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "made.h5"
    places = ["--work", str(tmp_path / "runs"), "--out", str(out)]
    assert make_catalogue.main(["--quick", "--only", "laughlin-1/3", "laughlin-1/2", *places]) == 0
    first = {name: read_entry(name, out) for name in ("laughlin-1/3", "laughlin-1/2")}
    written = {path: path.stat().st_mtime_ns for path in tmp_path.glob("runs/*/*.h5")}
    assert len(written) == 4
    # One entry anew, the other as it is; result files that are there are not sampled again.
    assert make_catalogue.main(["--quick", "--only", "laughlin-1/3", *places]) == 0
    assert {path: path.stat().st_mtime_ns for path in tmp_path.glob("runs/*/*.h5")} == written
    for name, entry in first.items():
        np.testing.assert_array_equal(read_entry(name, out).large.samples, entry.large.samples)
    # The same systems, but something is required of them.
    kept = out.read_bytes()
    plan = make_catalogue.quick(PLANS["laughlin-1/3"])
    monkeypatch.setitem(make_catalogue.PLANS, "laughlin-1/3", plan)
    monkeypatch.setitem(make_catalogue.PUBLISHED, "laughlin-1/3", (-0.5, 1e-5))
    assert make_catalogue.main(["--only", "laughlin-1/3", *places]) == 1
    assert "published -0.500000" in capsys.readouterr().err
    assert out.read_bytes() == kept
