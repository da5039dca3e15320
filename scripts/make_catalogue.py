"""Make the catalogue of liquids that is shipped inside the package, or parts of it anew.

    python scripts/make_catalogue.py                          all liquids, about 20 minutes of one core
    python scripts/make_catalogue.py --only fermi_sea-1/2     this one; the others are kept as they are
    python scripts/make_catalogue.py --quick --out small.h5   tiny systems, to see that everything works

Every liquid is sampled at two sizes, in a folder of result files (``--work``) from which a stopped run goes on.
A liquid enters the catalogue when both runs have converged and its energy agrees with what is published.
"""

from __future__ import annotations

import argparse
import json
import math
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any, NamedTuple

import h5py

import mcgeo
from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.estimate.structure_factor import shell_means
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.catalogue import CatalogueLiquid
from mcgeo.runs.catalogue_file import N_SAMPLES, CatalogueEntry, CatalogueRun, held_names, read_entry, write_catalogue
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import LIQUID_FILE, sample
from mcgeo.runs.state_config import CATALOGUE_NAMES
from mcgeo.runs.storage import as_liquid
from mcgeo.variational.energy_surface import EnergySurface

SHIPPED = Path(mcgeo.__file__).parent / "runs" / "catalogue.h5"
_LARGEST_Q = 6.0


class Size(NamedTuple):
    """Electrons, production and equilibration of one sampling, and the blocks that its production is cut into."""

    electrons: int
    sweeps: int
    equilibration: int
    blocks: int = 8


class Plan(NamedTuple):
    """Keys of the state, the two sizes, and the seed of the smaller; the larger takes the next one."""

    state: Mapping[str, Any]
    large: Size
    small: Size
    seed: int


def _laughlin(exponent: int, seed: int, sweeps: tuple[int, int], equilibration: int = 500) -> Plan:
    state = {"kind": "laughlin", "exponent": exponent}
    return Plan(state, Size(100, sweeps[0], equilibration), Size(50, sweeps[1], equilibration), seed)


def _moore_read(filling: str, seed: int) -> Plan:
    state = {"kind": "moore_read", "filling": filling}
    return Plan(state, Size(60, 2000, 160), Size(30, 3200, 160), seed)


def _sea(filling: str, seed: int, large: Size, small: Size) -> Plan:
    # Closed shells of the hexagonal cell; the energy depends on which shell is the last.
    return Plan({"kind": "fermi_sea", "filling": filling}, large, small, seed)


PLANS: dict[str, Plan] = {
    "laughlin-1": _laughlin(1, 2026_11, (20_000, 32_000)),
    "laughlin-1/3": _laughlin(3, 2026_13, (20_000, 32_000)),
    "laughlin-1/5": _laughlin(5, 2026_15, (10_000, 12_000)),
    "laughlin-1/7": _laughlin(7, 2026_17, (20_000, 32_000), equilibration=1000),
    "laughlin-1/2": _laughlin(2, 2026_21, (10_000, 12_000)),
    "laughlin-1/4": _laughlin(4, 2026_23, (10_000, 12_000)),
    "moore_read-1/2": _moore_read("1/2", 2026_31),
    "moore_read-1": _moore_read("1", 2026_33),
    "fermi_sea-1/2": _sea("1/2", 2026_41, Size(61, 240, 100), Size(37, 640, 100)),
    "fermi_sea-1/4": _sea("1/4", 2026_42, Size(37, 640, 100), Size(19, 320, 40)),
}

# Coulomb energy per particle of the infinite liquid in level 0, and its uncertainty.
PUBLISHED: dict[str, tuple[float, float]] = {
    # Closed form -sqrt(pi/8): Jancovici, Phys. Rev. Lett. 46, 386 (1981).
    "laughlin-1": (-math.sqrt(math.pi / 8.0), 0.0),
    # -0.4100(1): Levesque, Weis and MacDonald, Phys. Rev. B 30, 1056 (1984), and -0.409828(27): Kamilla and Jain,
    # Phys. Rev. B 55, R4895 (1997), both from memory; -0.40976(2) on spheres, computed apart from this package.
    "laughlin-1/3": (-0.40976, 2e-5),
    # Kamilla and Jain (1997), from memory.
    "laughlin-1/5": (-0.327499, 5e-6),
    # -0.2810: Levesque, Weis and MacDonald (1984), from memory; this on spheres, computed apart from this package.
    "laughlin-1/7": (-0.28094, 2e-5),
    # On spheres, computed apart from this package.
    "laughlin-1/2": (-0.48459, 3e-5),
    "laughlin-1/4": (-0.36170, 2e-5),
    # About -0.457: Park, Melik-Alaverdian, Bonesteel and Jain, Phys. Rev. B 58, R10167 (1998), from memory; this on
    # spheres, computed apart from this package, as the next.
    "moore_read-1/2": (-0.4574, 2e-4),
    "moore_read-1": (-0.450, 2e-3),
    # Park et al. (1998), and Rezayi and Read, Phys. Rev. Lett. 72, 900 (1994): -0.465 to -0.466, from memory.
    "fermi_sea-1/2": (-0.4657, 4e-4),
}


def quick(plan: Plan) -> Plan:
    """A tiny version: closed shells of seas, even numbers of electrons."""
    large, small = (13, 7) if plan.state["kind"] == "fermi_sea" else (8, 6)
    return plan._replace(large=Size(large, 160, 40), small=Size(small, 160, 40))


def sampled_size(state: Mapping[str, Any], size: Size, seed: int, folder: Path, threads: int) -> Liquid:
    """Sample one size, or take it from the folder."""
    keys = {
        "state": {**state, "electrons": size.electrons},
        "sampling": {
            "walkers": N_SAMPLES,
            "blocks": size.blocks,
            "sweeps": size.sweeps,
            "equilibration": size.equilibration,
            "seed": seed,
            "threads": threads,
        },
    }
    return as_liquid(sample(config_from_resolved(keys), folder), folder)


def catalogue_run(liquid: Liquid, file: Path) -> CatalogueRun:
    """What the catalogue keeps of a result file; one sample of it is one walker's mean."""
    with h5py.File(file, "r") as stored:
        version, libraries = str(stored.attrs["mcgeo_version"]), json.loads(stored.attrs["libraries"])
    found = liquid.occupations
    # Samples of single blocks, where there are such, run through the walkers block by block.
    samples = found.samples.reshape(-1, N_SAMPLES, len(found.m)).mean(axis=0)
    shown = liquid.norm < _LARGEST_Q
    curve = shell_means(liquid.norm[shown], liquid.structure_samples[:, shown], width=0.0)
    errors = found.free_errors
    assert errors is not None
    health = liquid.diagnostics_summary()
    return CatalogueRun(liquid.resolved, version, libraries, health, found.m, samples, errors, curve)


def catalogue_entry(name: str, plan: Plan, work: Path, threads: int) -> CatalogueEntry:
    """Both sizes of one liquid."""
    runs = []
    for index, size in enumerate((plan.small, plan.large)):
        folder = work / f"{name.replace('/', '_')}_{size.electrons}"
        print(f"{name}: {size.electrons} electrons, in {folder}", file=sys.stderr)
        liquid = sampled_size(plan.state, size, plan.seed + index, folder, threads)
        runs.append(catalogue_run(liquid, folder / LIQUID_FILE))
    found = liquid.occupations
    return CatalogueEntry(found.label, str(found.filling), found.statistics, large=runs[1], small=runs[0])


def energies(name: str, entry: CatalogueEntry) -> tuple[Estimate, Estimate]:
    """Coulomb energy per particle in level 0: with the whole error, and with the statistical one."""
    liquid = CatalogueLiquid({"kind": "catalogue", "catalogue": name, "conjugate": False}, entry)
    problem = Problem(ISOTROPIC, Coulomb())
    whole, statistical = (
        mean_estimate(EnergySurface(found, problem).sample_energies(ISOTROPIC))
        for found in (liquid.occupations, liquid.statistical_occupations)
    )
    return whole, statistical


def faults_of(name: str, entry: CatalogueEntry) -> list[str]:
    """Why an entry may not be shipped: runs that have not converged, an energy that is not the published one."""
    faults = [
        f"{name}: run of {run.n_electrons} electrons: {run.diagnostics['verdict']}"
        for run in (entry.large, entry.small)
        if run.diagnostics["verdict"] != "converged"
    ]
    if name in PUBLISHED:
        energy, (published, uncertainty) = energies(name, entry)[0], PUBLISHED[name]
        if abs(energy.value - published) > 4.0 * math.hypot(energy.error, uncertainty):
            faults.append(f"{name}: energy {energy.value:.6f} +- {energy.error:.1e}, published {published:.6f}")
    return faults


def main(argv: Sequence[str] | None = None) -> int:
    """Make what is asked for; 1 when an entry may not be shipped."""
    parser = argparse.ArgumentParser(description="Make the catalogue of liquids.")
    parser.add_argument("--only", nargs="+", choices=list(PLANS), default=list(PLANS), help="these, others as they are")
    parser.add_argument("--work", type=Path, default=Path("catalogue_results"), help="folder of the result files")
    parser.add_argument("--out", type=Path, default=SHIPPED, help="the catalogue (default: that in the package)")
    parser.add_argument("--threads", type=int, default=1)
    parser.add_argument("--quick", action="store_true", help="tiny systems, of which nothing is required")
    arguments = parser.parse_args(argv)
    kept = held_names(arguments.out) if arguments.out.exists() else []
    entries: dict[str, CatalogueEntry] = {}
    faults: list[str] = []
    for name in CATALOGUE_NAMES:
        if name not in arguments.only:
            if name in kept:
                entries[name] = read_entry(name, arguments.out)
            continue
        plan = quick(PLANS[name]) if arguments.quick else PLANS[name]
        entries[name] = catalogue_entry(name, plan, arguments.work, arguments.threads)
        whole, statistical = energies(name, entries[name])
        print(f"{name:15} {whole.value:.7f} +- {whole.error:.1e} (statistical {statistical.error:.1e})", flush=True)
        if not arguments.quick:
            faults += faults_of(name, entries[name])
    if faults:
        print("\n".join([*faults, f"{arguments.out} is left as it is"]), file=sys.stderr)
        return 1
    write_catalogue(arguments.out, entries)
    return 0


if __name__ == "__main__":
    sys.exit(main())
