"""The catalogue's file: what is written is read, what is wrong is refused, and the package brings it along."""

from __future__ import annotations

import configparser
import fnmatch
from collections.abc import Callable
from importlib.resources import files
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest

from mcgeo.errors import StorageError
from mcgeo.estimate.structure_factor import Curve
from mcgeo.runs.catalogue import catalogue_liquid
from mcgeo.runs.catalogue_file import FORMAT, N_SAMPLES, CatalogueEntry, CatalogueRun, read_entry, write_catalogue
from mcgeo.runs.seal import seal
from mcgeo.runs.state_config import CATALOGUE_NAMES, CatalogueConfig
from scripts.make_catalogue import PLANS, SHIPPED

ROOT = Path(__file__).parents[2]
NAME = "laughlin-1/3"


def run_of(electrons: int) -> CatalogueRun:
    generator = np.random.default_rng(electrons)
    curve = Curve(*generator.uniform(0.1, 1.0, (3, 7)))
    m = np.arange(1, 12, 2)
    config = {"state": {"kind": "laughlin", "exponent": 3, "electrons": electrons}}
    samples, errors = generator.normal(size=(N_SAMPLES, 6)), generator.uniform(size=6)
    return CatalogueRun(config, "0.0", {"numpy": "2.0"}, {"verdict": "converged"}, m, samples, errors, curve)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    place = tmp_path / "small.h5"
    write_catalogue(place, {NAME: CatalogueEntry("Laughlin 1/3", "1/3", "fermions", run_of(8), run_of(6))})
    return place


def test_round_trip(path: Path) -> None:
    found = read_entry(NAME, path)
    assert (found.label, found.filling, found.statistics) == ("Laughlin 1/3", "1/3", "fermions")
    for run, electrons in ((found.large, 8), (found.small, 6)):
        wanted = run_of(electrons)
        assert run.n_electrons == electrons and run.resolved == wanted.resolved
        np.testing.assert_array_equal(run.m, wanted.m)
        np.testing.assert_array_equal(run.samples, wanted.samples)
        np.testing.assert_array_equal(run.free_errors, wanted.free_errors)
        np.testing.assert_array_equal(run.structure.error, wanted.structure.error)


def test_the_same_entries_give_the_same_bytes(path: Path, tmp_path: Path) -> None:
    write_catalogue(tmp_path / "again.h5", {NAME: read_entry(NAME, path)})
    assert (tmp_path / "again.h5").read_bytes() == path.read_bytes()


def _replace(file: Any, key: str, values: Any, **options: Any) -> None:
    del file[key]
    file.create_dataset(key, data=values, **options)


GROUP = NAME.replace("/", "_")
SAMPLES = f"{GROUP}/large/samples"
DAMAGES: dict[str, tuple[Callable[[Any], None], str]] = {
    "no entry": (lambda file: file.pop(GROUP), "is missing"),
    "missing part": (lambda file: file.pop(SAMPLES), "samples is missing"),
    "unknown part": (lambda file: file.create_group(f"{GROUP}/more"), "which is not known"),
    "too few samples": (lambda file: _replace(file, SAMPLES, np.zeros((5, 6))), "has the shape"),
    "other m": (lambda file: _replace(file, SAMPLES, np.zeros((N_SAMPLES, 5))), "has the shape"),
    "type": (lambda file: _replace(file, SAMPLES, np.zeros((N_SAMPLES, 6), dtype="f4")), "another type"),
    "rank": (lambda file: _replace(file, SAMPLES, np.zeros(N_SAMPLES)), "shape"),
    "not finite": (lambda file: _replace(file, SAMPLES, np.full((N_SAMPLES, 6), np.nan)), "not finite"),
    "waves": (lambda file: _replace(file, f"{GROUP}/large/q", np.zeros((7, 1))), "has the shape"),
    "config": (lambda file: _replace(file, f"{GROUP}/small/config", b"{", dtype="S1"), "not a result file"),
    "label": (lambda file: _replace(file, f"{GROUP}/label", 3), "not one text"),
    "huge": (
        lambda file: _replace(file, SAMPLES, None, shape=(10**12, 6), chunks=(1024, 6), dtype="f8"),
        "stored in pieces",
    ),
}


@pytest.mark.parametrize("damage", DAMAGES)
def test_damage_is_refused(path: Path, damage: str) -> None:
    """A file whose checksum is right all the same."""
    change, words = DAMAGES[damage]
    with h5py.File(path, "r+") as file:
        change(file)
    contents = bytearray(path.read_bytes())
    seal(memoryview(contents), FORMAT)
    path.write_bytes(contents)
    with pytest.raises(StorageError, match=words):
        read_entry(NAME, path)


def test_flipped_bit_and_no_file_are_refused(path: Path, tmp_path: Path) -> None:
    contents = bytearray(path.read_bytes())
    contents[-100] ^= 1
    path.write_bytes(contents)
    with pytest.raises(StorageError, match="damaged"):
        read_entry(NAME, path)
    with pytest.raises(StorageError, match="no such file"):
        read_entry(NAME, tmp_path / "none.h5")


def test_names_plans_and_file_agree() -> None:
    assert set(PLANS) == set(CATALOGUE_NAMES)
    with h5py.File(SHIPPED, "r") as file:
        assert set(file) == {name.replace("/", "_") for name in CATALOGUE_NAMES}
    for name in CATALOGUE_NAMES:
        entry = read_entry(name)
        assert str(CatalogueConfig(catalogue=name).filling) == entry.filling
        for size, run in (("large", entry.large), ("small", entry.small)):
            plan = PLANS[name]
            assert run.resolved["state"].items() >= plan.state.items()
            wanted = getattr(plan, size)
            sampling = run.resolved["sampling"]
            lengths = (sampling[key] for key in ("sweeps", "equilibration", "blocks"))
            assert (run.n_electrons, *lengths) == wanted
            assert sampling["seed"] == plan.seed + (size == "large")


@pytest.mark.parametrize("name", CATALOGUE_NAMES)
def test_conjugates_are_allowed_where_they_exist(name: str) -> None:
    entry = read_entry(name)
    exists = entry.statistics == "fermions" and entry.filling != "1"
    if exists:
        keys = CatalogueConfig(catalogue=name, conjugate=True).model_dump()
        assert catalogue_liquid(keys).occupations.filling < 1
    else:
        with pytest.raises(ValueError, match="fermions below filling 1 only"):
            CatalogueConfig(catalogue=name, conjugate=True)


def test_the_package_brings_the_file_along() -> None:
    """A wheel holds what ``package_data`` names."""
    settings = configparser.ConfigParser()
    settings.read(ROOT / "setup.cfg")
    patterns = settings["options.package_data"]["mcgeo"].split()
    shipped = files("mcgeo.runs") / "catalogue.h5"
    assert shipped.is_file()
    assert any(fnmatch.fnmatch("runs/catalogue.h5", pattern) for pattern in patterns)
    assert not any(fnmatch.fnmatch("runs/other.bin", pattern) for pattern in patterns)
    assert len(shipped.read_bytes()) < 3_000_000
