"""Are the error bars right? Many short runs of known liquids, every result minus its truth in units of its own error.

    python scripts/calibrate.py [--seeds 200] [--out FOLDER] [--only WORD]

Such pulls of honest errors are standard normal deviates. Few samples make them Student's t, which is taken into account
with the number of samples behind each error; truth is an exact value where there is one, else the mean over all
other seeds. Prints a table and writes calibration.csv and calibration.png.
"""

from __future__ import annotations

import argparse
import csv
import dataclasses
import math
import sys
import tempfile
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.droplet import Droplet
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import sample
from mcgeo.runs.sampled import Sampled
from mcgeo.runs.scan import optimum
from mcgeo.sampling.measurement import CONTROLS
from mcgeo.variational.energy_surface import EnergySurface

Array = NDArray[np.float64]

LARGEST_Z = 4.0
LEAST_PROBABILITY = 1e-4
_JACKKNIFE_GROUPS = 64
_WAVES = (0, 2, 8, 20)
_OCCUPATIONS = 12

# A mass and a permittivity with axes of their own: the hole's angle is free. Holes lie on a line between the two
# metrics; where that line is nearest to the circle the stretch stands still to first order, and so would its error.
PROBLEM = {
    "mass": {"ratio": 9.0, "angle_degrees": 0.0},
    "interaction": {"kind": "coulomb", "dielectric": {"ratio": 2.0, "angle_degrees": 50.0}},
}


@dataclass(frozen=True)
class Case:
    """One liquid, sampled with many seeds.

    ``exact`` holds what is known, by the names of the quantities.
    """

    name: str
    state: Mapping[str, Any]
    sampling: Mapping[str, Any]
    disk: bool = False
    controls: bool = True
    exact: Mapping[str, float] = field(default_factory=dict)


def laughlin(exponent: int, electrons: int) -> dict[str, Any]:
    return {"kind": "laughlin", "exponent": exponent, "electrons": electrons}


_SIX = {"energy of the cell": -0.4113987749}
_DROPLET = {"energy": -0.391516700953, "<r^2>": 17.0}
_DROPLET |= {f"n_{k}": n for k, n in enumerate((0.3431340578, 0.3006365678, 0.2781254887, 0.270575774, 0.2787786959))}

# Exact: Laughlin 1/3 of six electrons on the hexagonal torus, by diagonalisation in second quantisation computed
# independently of this package; droplets by rational expansion (Ciftja, Physica B 404, 227 (2009) for such data).
CASES = (
    Case("Laughlin 1/3, 6 electrons", laughlin(3, 6), {"walkers": 32, "sweeps": 320, "blocks": 8}, exact=_SIX),
    Case(
        "Laughlin 1/3, 6, without control variates", laughlin(3, 6), {"walkers": 32, "sweeps": 320, "blocks": 8},
        controls=False, exact=_SIX,
    ),
    Case("Laughlin 1/3, 6, eight walkers", laughlin(3, 6), {"walkers": 8, "sweeps": 640, "blocks": 16}, exact=_SIX),
    Case(
        "Laughlin 1/3, 6, slow chains", laughlin(3, 6), {"walkers": 32, "sweeps": 320, "blocks": 8, "step": 1.0},
        exact=_SIX,
    ),
    Case("Laughlin 1/3, 20 electrons", laughlin(3, 20), {"walkers": 16, "sweeps": 240, "blocks": 8}),
    Case(
        "Moore-Read 1/2, 8 electrons", {"kind": "moore_read", "filling": "1/2", "electrons": 8, "sector": "all"},
        {"walkers": 16, "sweeps": 160, "blocks": 8},
    ),
    Case(
        "sea 1/2, 7 electrons", {"kind": "fermi_sea", "filling": "1/2", "electrons": 7},
        {"walkers": 16, "sweeps": 160, "blocks": 8},
    ),
    Case(
        "droplet, Laughlin 1/3, 6 electrons", laughlin(3, 6), {"walkers": 16, "sweeps": 480, "blocks": 8}, disk=True,
        exact=_DROPLET,
    ),
    Case(
        "droplet, Moore-Read 1/2, 6 electrons", {"kind": "moore_read", "filling": "1/2", "electrons": 6},
        {"walkers": 16, "sweeps": 320, "blocks": 8}, disk=True, exact={"energy": -0.435481544822, "<r^2>": 11.0},
    ),
)  # fmt: skip


@dataclass(frozen=True)
class Found:
    """A number with its error and the degrees of freedom of that error."""

    value: float
    error: float
    freedom: int


@dataclass(frozen=True)
class FoundTogether:
    """Several numbers with their covariance."""

    value: Array
    covariance: Array
    freedom: int


def run(case: Case, seed: int, folder: Path) -> Sampled:
    """One sampling, through the path of a user's run."""
    sampling = {"equilibration": 200, "seed": seed, "threads": 1, **case.sampling}
    geometry = {"geometry": {"kind": "disk"}} if case.disk else {"cell": {"shape": "hexagonal"}}
    config = config_from_resolved({"state": case.state, **geometry, "sampling": sampling})
    result = sample(config, folder, overwrite=True, quiet=True)
    if case.controls or CONTROLS not in result.blocks.means:
        return result
    means = {name: mean for name, mean in result.blocks.means.items() if name != CONTROLS}
    return dataclasses.replace(result, blocks=dataclasses.replace(result.blocks, means=means))


def quantities(result: Sampled) -> dict[str, Found | FoundTogether]:
    """Everything with an error that a run hands out, by name; the optimum is that of liquids on the torus."""
    found = _droplet_quantities(result) if isinstance(result, Droplet) else _liquid_quantities(result)
    named: dict[str, Found | FoundTogether] = {name: Found(e.value, e.error, n - 1) for name, (e, n) in found.items()}
    if isinstance(result, Liquid):
        occupations = result.occupations
        first = int(np.argmax(occupations.m >= result.states[0].first_occupied))
        pair = occupations.samples[:, first : first + 2]
        named[f"n_{occupations.m[first]}, n_{occupations.m[first + 1]} together"] = FoundTogether(
            pair.mean(axis=0), np.cov(pair.T) / len(pair), len(pair) - 1
        )
    return named


def _liquid_quantities(liquid: Sampled) -> dict[str, tuple[Estimate, int]]:
    assert isinstance(liquid, Liquid)
    occupations, structure = liquid.occupations, liquid.structure_samples
    n = len(structure)
    surface = EnergySurface(occupations, Problem(liquid.frame.metric, Coulomb()))
    found = {
        "energy of the cell": (liquid.torus_energy(Coulomb()), n),
        "energy of the liquid": (mean_estimate(surface.sample_energies(liquid.frame.metric)), n),
    }
    for wave in _WAVES:
        found[f"S(q), q = {liquid.norm[wave]:.2f}"] = (mean_estimate(structure[:, wave]), n)
    for index, m in enumerate(occupations.m[:_OCCUPATIONS]):
        if m >= liquid.states[0].first_occupied:
            found[f"n_{m}"] = (occupations.occupation(index), n)
    return found | _optimum_quantities(liquid, n)


def _droplet_quantities(droplet: Droplet) -> dict[str, tuple[Estimate, int]]:
    energies, occupations = droplet.energies, droplet.occupations
    n = len(occupations.orbital_samples)
    xx, yy, _ = droplet.samples("second_moments").T
    found = {
        "energy": (energies.total, n),
        "electrons with electrons": (energies.electron_electron, n),
        "<r^2>": (mean_estimate(xx + yy), n),
    }
    found |= {f"n_{k}": (occupations.orbital(k), n) for k in range(5)}
    found |= {f"w_{occupations.pair_momenta[k]}": (occupations.pair(k), n) for k in range(1, 4)}
    return found


def _optimum_quantities(liquid: Liquid, n: int) -> dict[str, tuple[Estimate, int]]:
    best = optimum(liquid, {**liquid.resolved["problem"], **PROBLEM})
    groups = min(n, _JACKKNIFE_GROUPS)
    minimum = best.minimum
    return {
        "energy at the optimum": (minimum.energy, groups),
        "gain over the isotropic hole": (minimum.gain_isotropic, groups),
        "stretch": (minimum.stretch, groups),
        "angle": (minimum.angle, groups),
        "stiffness along": (minimum.stiffness_along, groups),
        "stiffness across": (minimum.stiffness_across, groups),
        "response": (best.response.response, groups),
    }


def normal_deviates(t: Array, freedom: Array) -> Array:
    """Student's t of few samples as the normal deviates of equal tail probability."""
    return np.asarray(np.sign(t) * stats.norm.isf(stats.t.sf(np.abs(t), freedom)))


def _deviates_together(found: Sequence[FoundTogether]) -> Array:
    """Hotelling's T^2 against the mean of all other runs, as normal deviates (Anderson, An Introduction to Multivariate
    Statistical Analysis, section 5.2)."""
    n, p = len(found), len(found[0].value)
    values = np.array([one.value for one in found])
    deviation = values - (values.sum(axis=0) - values) / (n - 1)
    inverse = np.linalg.inv([one.covariance * n / (n - 1) for one in found])
    t_squared = np.einsum("na,nab,nb->n", deviation, inverse, deviation)
    freedom = np.array([one.freedom for one in found])
    left = freedom - p + 1
    return np.asarray(stats.norm.isf(stats.f.sf(t_squared * left / (p * freedom), p, left)))


def pulls(runs: Sequence[Mapping[str, Found | FoundTogether]], exact: Mapping[str, float]) -> dict[str, Array]:
    """Normal deviates of every quantity over the runs, against its exact value or the mean of all other runs."""
    result = {}
    for name, first in runs[0].items():
        if isinstance(first, FoundTogether):
            together = [one[name] for one in runs]
            # Where a bound was in force samples stand still, and nothing is known of their covariance.
            if all(np.linalg.matrix_rank(one.covariance) == len(one.value) for one in together):
                result[name] = _deviates_together(together)
            continue
        value, error, freedom = np.array([dataclasses.astuple(one[name]) for one in runs]).T
        n = len(value)
        if name in exact:
            truth, spread = exact[name], error
        else:
            truth, spread = (value.sum() - value) / (n - 1), error * math.sqrt(n / (n - 1))
        with np.errstate(divide="ignore", invalid="ignore"):
            result[name] = normal_deviates((value - truth) / spread, freedom)
    return result


@dataclass(frozen=True)
class Verdict:
    """Mean and width of pulls, the chance of their distribution (Kolmogorov and Smirnov), and whether they pass."""

    mean: float
    width: float
    probability: float
    calibrated: bool


def judged(z: Array) -> Verdict:
    """Whether pulls are standard normal deviates: mean zero, sum of squares as of chi-square, distribution normal."""
    z = np.asarray(z, dtype=float)
    if not np.all(np.isfinite(z)):
        return Verdict(math.nan, math.nan, 0.0, False)
    n, total = len(z), float(z @ z)
    probability = float(stats.kstest(z, "norm").pvalue)
    tails = min(stats.chi2.sf(total, n), stats.chi2.cdf(total, n))
    centred = abs(z.mean()) * math.sqrt(n) < LARGEST_Z
    return Verdict(
        float(z.mean()), float(z.std(ddof=1)), probability,
        bool(centred and tails > LEAST_PROBABILITY and probability > LEAST_PROBABILITY),
    )  # fmt: skip


def calibration(case: Case, seeds: Sequence[int], report: Callable[[str], None]) -> dict[str, Array]:
    """Pulls of one case."""
    runs = []
    with tempfile.TemporaryDirectory() as folder:
        for seed in seeds:
            runs.append(quantities(run(case, seed, Path(folder))))
    report(f"{case.name}: {len(runs)} runs")
    return pulls(runs, case.exact)


def rows(found: Mapping[str, Mapping[str, Array]]) -> Iterator[tuple[str, str, Verdict]]:
    for case, by_name in found.items():
        for name, z in by_name.items():
            yield case, name, judged(z)


# Quantities by kind, for the figure; names start with these words.
_KINDS = {
    "energies": ("energy", "electrons with", "gain"),
    "S(q), <r^2>": ("S(q)", "<r^2>"),
    "occupations": ("n_", "w_"),
    "stretch, angle, response": ("stretch", "angle", "response"),
    "stiffness": ("stiffness",),
}


def draw(found: Mapping[str, Mapping[str, Array]], path: Path) -> None:
    """Histograms of pulls by kind beside the normal density, and their width in every liquid."""
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, (left, right) = plt.subplots(1, 2, figsize=(9.5, 3.8), layout="constrained")
    x = np.linspace(-4.5, 4.5, 200)
    left.plot(x, stats.norm.pdf(x), color="black", label="normal")
    n_seeds = len(next(iter(next(iter(found.values())).values())))
    for offset, (kind, words) in zip(np.linspace(-0.3, 0.3, len(_KINDS)), _KINDS.items(), strict=True):
        of_kind = [[z for name, z in by_name.items() if name.startswith(words)] for by_name in found.values()]
        pooled = np.concatenate([z for many in of_kind for z in many])
        left.hist(pooled, bins=np.linspace(-4.5, 4.5, 37), density=True, histtype="step", label=kind)
        for row, many in enumerate(of_kind):
            widths = [z.std(ddof=1) for z in many]
            right.plot(widths, np.full(len(widths), row + offset), ".", color=left.patches[-1].get_edgecolor())
    left.set(xlabel="(result - truth)/error", ylabel="density", ylim=(0.0, 0.62))
    left.set_title(f"{n_seeds} seeds of each liquid")
    left.legend(fontsize="small", frameon=False, ncols=2, loc="upper center")
    # Width of n normal deviates: 1 within sqrt(2/n)/2.
    band = 2.0 * math.sqrt(0.5 / n_seeds)
    right.axvspan(1.0 - band, 1.0 + band, color="0.85", zorder=0)
    right.set_yticks(range(len(found)), list(found), fontsize="small")
    right.invert_yaxis()
    right.set(xlabel="width of the pulls; band: two sd", xlim=(0.6, 1.4), title="one point per quantity")
    figure.savefig(path, dpi=110)


def _write_csv(found: Mapping[str, Mapping[str, Array]], path: Path) -> None:
    with path.open("w", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(["liquid", "quantity", "runs", "mean", "width", "probability", "calibrated"])
        for case, name, verdict in rows(found):
            runs = len(found[case][name])
            writer.writerow([case, name, runs, *dataclasses.astuple(verdict)])


def main(argv: Sequence[str] | None = None) -> int:
    """Table on standard output; exit code 1 when an error bar is wrong."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--seeds", type=int, default=200)
    parser.add_argument("--out", type=Path, default=Path(), help="folder of the table and the figure")
    parser.add_argument("--only", default="", metavar="WORD", help="cases whose name holds this word")
    arguments = parser.parse_args(argv)
    cases = [case for case in CASES if arguments.only in case.name]
    seeds = range(10_000, 10_000 + arguments.seeds)
    found = {case.name: calibration(case, seeds, lambda line: print(line, file=sys.stderr)) for case in cases}
    print(f"{'liquid':42}  {'quantity':30}  {'mean':>6}  {'width':>6}  {'KS p':>6}")
    good = True
    for case, name, verdict in rows(found):
        good &= verdict.calibrated
        mark = "" if verdict.calibrated else "  wrong"
        print(f"{case:42}  {name:30}  {verdict.mean:6.2f}  {verdict.width:6.3f}  {verdict.probability:6.3f}{mark}")
    _write_csv(found, arguments.out / "calibration.csv")
    draw(found, arguments.out / "calibration.png")
    return 0 if good else 1


if __name__ == "__main__":
    sys.exit(main())
