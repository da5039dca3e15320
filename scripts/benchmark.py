"""Speed of every sampled state in one table: moves, pairs, what an energy costs, and what plain NumPy makes of it.

Times are processor seconds of one thread, the least of several runs; all ratios are within one run of this script.
``error2_cpu`` is the squared error of the energy per electron times the processor seconds spent on it, moves,
measurements and regression on control variates, at the program's own distance of measurements; ``stretch2_cpu`` the
same of the optimum's stretch at mass ratio 4. ``roofline`` is the share of the processor's measured rate of fused
multiply-adds that the pair factors alone make up. ``versus_numpy`` (256 walkers side by side) and ``versus_loop``
(one) are ratios of moves per second, ``versus_emcee`` of effective energies per second, if emcee is installed.
Below the states: metrics per second, each
with the energies of all block samples, and a whole optimum with its response, nothing kept from problem to problem.
"""

from __future__ import annotations

import argparse
import importlib.util
import json
import math
import threading
import time
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import numpy as np
from baselines import emcee_traces, numpy_moves_per_second

from mcgeo.estimate.control_variates import cleared, control_z
from mcgeo.estimate.occupations import PairOccupations, fit_occupations
from mcgeo.estimate.statistics import integrated_autocorrelation_time, mean_estimate
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.kernels._jit import lean_kernel
from mcgeo.kernels.lanes import LANES, aligned_zeros, load, store
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import schedule_from
from mcgeo.runs.config import config_from_resolved, resolved
from mcgeo.runs.experiment import experiment_of
from mcgeo.runs.scan import optimum
from mcgeo.sampling.measurement import CONTROLS, STRUCTURE
from mcgeo.sampling.tuning import tuned_step
from mcgeo.sampling.walkers import groups_of, start_walkers
from mcgeo.states.base import FERMIONS
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum

_LAUGHLIN = {"kind": "laughlin", "exponent": 3}
_MOORE_READ = {"kind": "moore_read", "filling": "1/2"}
_SEA = {"kind": "fermi_sea", "filling": "1/2"}
# State, geometry, sizes, sizes with error^2 x CPU, operations of a pair factor on one register.
_SERIES: list[tuple[dict[str, Any], str, tuple[int, ...], tuple[int, ...], int | None]] = [
    (_LAUGHLIN, "torus", (20, 50, 100, 200, 400), (50, 100), 15),
    (_LAUGHLIN, "disk", (20, 50, 100, 200, 400), (50,), 5),
    (_MOORE_READ, "torus", (20, 50, 100), (50,), None),
    (_SEA, "torus", (7, 13, 19, 37), (37,), None),
]
_BASELINE_SIZES = {20, 50}
_EMCEE_SIZE = 6
_RUNS = 5


def least(action: Callable[[], Any], seconds: float) -> float:
    """Least processor seconds of a call, of several runs of about ``seconds`` each."""
    action()
    started = time.thread_time()
    action()
    n_calls = max(1, int(seconds / max(time.thread_time() - started, 1e-7)))
    best = math.inf
    for _ in range(_RUNS):
        started = time.thread_time()
        for _ in range(n_calls):
            action()
        best = min(best, (time.thread_time() - started) / n_calls)
    return best


@lean_kernel
def _multiply_add(values: np.ndarray, n: int) -> None:
    """n times 16 independent products and sums on eight lanes."""
    x, y = load(values, 16), load(values, 17)
    a, b, c, d = load(values, 0), load(values, 1), load(values, 2), load(values, 3)
    e, f, g, h = load(values, 4), load(values, 5), load(values, 6), load(values, 7)
    i, j, k, m = load(values, 8), load(values, 9), load(values, 10), load(values, 11)
    o, p, q, r = load(values, 12), load(values, 13), load(values, 14), load(values, 15)
    for _ in range(n):
        a, b, c, d = a * x + y, b * x + y, c * x + y, d * x + y
        e, f, g, h = e * x + y, f * x + y, g * x + y, h * x + y
        i, j, k, m = i * x + y, j * x + y, k * x + y, m * x + y
        o, p, q, r = o * x + y, p * x + y, q * x + y, r * x + y
    store(values, 0, a + b + c + d + e + f + g + h + i + j + k + m + o + p + q + r)


def seconds_per_operation(seconds: float) -> float:
    """Seconds of one fused multiply-add on eight lanes."""
    values = aligned_zeros((18, LANES))
    values[16] = 0.999
    return least(lambda: _multiply_add(values, 10_000), seconds) / 160_000


def keys_of(state: dict[str, Any], geometry: str, n: int) -> dict[str, Any]:
    """Resolved configuration with the program's defaults."""
    return resolved(config_from_resolved({"state": {**state, "electrons": n}, "geometry": {"kind": geometry}}))


class Case:
    """Eight walkers of one state in equilibrium, with the step tuned."""

    def __init__(self, state: dict[str, Any], geometry: str, n: int) -> None:
        self.keys = keys_of(state, geometry, n)
        self.experiment = experiment_of(self.keys)
        self.state = self.experiment.states[0]
        groups = groups_of(self.state, start_walkers(self.state, LANES, seed=1))
        self.group = groups[0]
        self.group.advance(self.state.first_step, 30)
        self.step, self.acceptance = tuned_step(self.state, groups, 8, self.group.advance)

    def moves_per_second(self, seconds: float) -> float:
        """Proposals per processor second."""
        per_sweep = LANES * self.state.n_electrons * self.state.proposals_per_sweep
        return per_sweep / least(lambda: self.group.advance(self.step, 1), seconds)

    def costs(self, seconds: float) -> tuple[float, float | None]:
        """error2_cpu and stretch2_cpu."""
        measurement, between = self.experiment.measurements[0], schedule_from(self.keys, self.state).sweeps_between
        n_blocks, n_measurements = 64, 16
        stop = threading.Event()
        measurement.block(self.group, self.step, 4, between, stop)
        started = time.thread_time()
        measurement.block(self.group, self.step, n_measurements, between, stop)
        once = time.thread_time() - started
        n_measurements = max(n_measurements, int(n_measurements * seconds / once / n_blocks))
        started = time.thread_time()
        records = [measurement.block(self.group, self.step, n_measurements, between, stop) for _ in range(n_blocks)]
        if STRUCTURE not in records[0].means:
            spent = time.thread_time() - started
            trace = np.concatenate([record.trace for record in records], axis=1)
            return float(trace.var() * integrated_autocorrelation_time(trace) * spent / trace.size), None
        structure, controls = (np.array([r.means[name] for r in records]) for name in (STRUCTURE, CONTROLS))
        z = control_z(controls.reshape(-1, controls.shape[-1]))
        samples = cleared(structure, controls, z).blocks.reshape(-1, structure.shape[-1])
        spent = time.thread_time() - started
        energy = mean_estimate(samples @ measurement.trace_weights).error ** 2 * spent
        if self.state.kind != "laughlin":
            return energy, None
        norm = np.sqrt(self.state.frame.metric.wavevector_norm_sq(measurement.waves.vectors))
        occupations = fit_occupations(self.state, norm, samples)
        optimum = find_minimum(EnergySurface(occupations, Problem(UnimodularMetric(math.log(2.0)), Coulomb())))
        return energy, float(optimum.stretch.error**2 * spent)


def versus_emcee(seconds: float) -> float:
    """Ratio of effective energies per second at `_EMCEE_SIZE` electrons; a lower bound where emcee has not mixed."""
    case, thin = Case(_LAUGHLIN, "torus", _EMCEE_SIZE), 5
    measurement, n = case.experiment.measurements[0], _EMCEE_SIZE
    own, _ = case.costs(seconds)
    start = []
    for _ in range(n):
        case.group.advance(case.step, 50)
        start.append(np.stack([case.group.a.T, case.group.b.T], axis=-1))

    def energy(positions: Any) -> Any:
        turns = positions @ measurement.waves.integers.T
        return np.abs(np.exp(-2j * np.pi * turns).sum(axis=-2)) ** 2 @ measurement.trace_weights / n

    trace, per_step = emcee_traces(
        3, np.concatenate(start), case.state.frame.isotropic.tau, int(1000 * seconds), thin, energy
    )
    time_in_steps = thin * integrated_autocorrelation_time(trace.T)
    return float(trace.var() * time_in_steps * per_step / trace.shape[1] / own)


def measured(series: int, n: int, operation: float, seconds: float, quick: bool) -> dict[str, Any]:
    """One row."""
    state, geometry, _, with_costs, operations = _SERIES[series]
    case = Case(state, geometry, n)
    rate = case.moves_per_second(seconds)
    ns_per_pair = 1e9 / rate / (n - 1)
    hits = case.state.proposals_per_sweep
    row = {
        "state": case.state.label,
        "geometry": geometry,
        "electrons": n,
        "acceptance": case.acceptance,
        "moves_per_second": rate,
        "ns_per_pair": ns_per_pair,
        "roofline": operations * (1.0 + 1.0 / hits) * operation * 1e9 / LANES / ns_per_pair if operations else None,
    } | dict.fromkeys(("error2_cpu", "stretch2_cpu", "versus_numpy", "versus_loop", "versus_emcee"))
    if n in with_costs:
        row["error2_cpu"], row["stretch2_cpu"] = case.costs(8.0 * seconds)
    if series == 0 and n in _BASELINE_SIZES and not (quick and n > min(_BASELINE_SIZES)):
        cell = case.state.frame.isotropic
        for key, walkers in (("versus_numpy", 256), ("versus_loop", 1)):
            plain, _ = numpy_moves_per_second(3, n, cell.tau, cell.side, case.step, walkers, 4.0 * seconds)
            row[key] = rate / plain
    return row


def exponents(rows: list[dict[str, Any]]) -> dict[str, float]:
    """Power of N in the time per move, by state and geometry, from a straight line through the logarithms."""
    found = {}
    for name in dict.fromkeys((row["state"], row["geometry"]) for row in rows):
        own = [row for row in rows if (row["state"], row["geometry"]) == name]
        if len(own) > 1:
            n, rate = (np.log([row[key] for row in own]) for key in ("electrons", "moves_per_second"))
            found[", ".join(name)] = float(np.polyfit(n, -rate, 1)[0])
    return found


def variational_rows(seconds: float) -> list[dict[str, Any]]:
    """Metrics per second and milliseconds of a whole optimum, of a liquid of the usual size."""
    m = np.arange(1, 46, 2)
    samples = np.where(m < 3, -1.0, 0.2 * np.random.default_rng(1).normal(1.0, 0.05, (256, len(m))) * 0.8 ** (m - 3))
    liquid = PairOccupations("benchmark", Fraction(1, 3), FERMIONS, m, samples)
    mass, metric = {"ratio": 4.0}, UnimodularMetric(0.31)
    well = {"kind": "square_well", "width": 2.0}
    problems: dict[str, dict[str, Any]] = {
        "Coulomb": {},
        "Coulomb, dielectric at 30 degrees": {
            "interaction": {"kind": "coulomb", "dielectric": {"ratio": 3.0, "angle_degrees": 30.0}}
        },
        "square well, level 1": {"interaction": well, "level": 1},
        "tilted field": {"tilt": {"angle_degrees": 30.0, "confinement_ratio": 3.0}},
        "rigid": {"variation": "rigid", "level_mixing": 1.0},
        "two metrics": {"variation": "two_metric", "level_mixing": 1.0},
    }
    rows = []
    for name, keys in problems.items():
        given = {"state": {**_LAUGHLIN, "electrons": 50}, "problem": {"mass": mass, **keys}}
        problem = resolved(config_from_resolved(given))["problem"]
        surface = optimum(liquid, problem).surface
        once = least(lambda surface=surface: surface.sample_energies(metric), seconds)
        whole = least(lambda problem=problem: optimum(liquid, problem), seconds)
        rows.append({"problem": name, "metrics_per_second": 1.0 / once, "optimum_ms": 1e3 * whole})
    return rows


def table(report: dict[str, Any]) -> str:
    """The report for reading."""
    shown = {
        "electrons": "d", "acceptance": ".3f", "moves_per_second": ".3g", "ns_per_pair": ".3f", "roofline": ".2f",
        "error2_cpu": ".2e", "stretch2_cpu": ".2e", "versus_numpy": ".0f", "versus_loop": ".0f", "versus_emcee": ".0f",
    }  # fmt: skip
    head = {"moves_per_second": "moves/s", "ns_per_pair": "ns/pair"}
    lines = [f"{'state':28} {'geometry':8} " + " ".join(f"{head.get(key, key):>12}" for key in shown)]
    for row in report["rows"]:
        cells = ["" if row[key] is None else format(row[key], form) for key, form in shown.items()]
        lines.append(f"{row['state']:28} {row['geometry']:8} " + " ".join(f"{cell:>12}" for cell in cells))
    lines.append(f"fused multiply-adds on eight lanes: {report['operations_per_second']:.3g}/s")
    lines += [f"time per move, {name}: N^{power:.2f}" for name, power in report["exponents"].items()]
    lines += [
        f"{row['problem']:34} {row['metrics_per_second']:8.0f} metrics/s, optimum {row['optimum_ms']:6.2f} ms"
        for row in report["variational"]
    ]
    return "\n".join(lines)


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--json", action="store_true", help="one JSON object instead of the table")
    parser.add_argument("--quick", action="store_true", help="shorter runs and fewer baselines")
    arguments = parser.parse_args()
    seconds = 0.08 if arguments.quick else 0.4
    operation = seconds_per_operation(seconds)
    rows = [
        measured(series, n, operation, seconds, arguments.quick)
        for series, (_, _, sizes, _, _) in enumerate(_SERIES)
        for n in sizes
    ]
    small = measured(0, _EMCEE_SIZE, operation, seconds, arguments.quick)
    if importlib.util.find_spec("emcee") is not None:
        small["versus_emcee"] = versus_emcee(8.0 * seconds)
    report = {
        "rows": [small, *rows],
        "variational": variational_rows(seconds),
        "operations_per_second": 1.0 / operation,
        "exponents": exponents(rows),
    }
    print(json.dumps(report, indent=2) if arguments.json else table(report))


if __name__ == "__main__":
    main()
