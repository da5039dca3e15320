"""``plot``: one figure, with its numbers, from a result file alone, or of a liquid of the catalogue."""

from __future__ import annotations

import argparse
import json
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

import mcgeo
from mcgeo.commands import plot_sweep
from mcgeo.commands.run import default_folder, result_file
from mcgeo.errors import ConfigError, StorageError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.pair_correlation import (
    bulk_radial_pair_correlation,
    counted_pair_correlation,
    radial_pair_correlation,
)
from mcgeo.estimate.statistics import mean_estimate
from mcgeo.estimate.structure_factor import Curve, shell_means
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.report import figures
from mcgeo.report.catalogue_text import origin_text
from mcgeo.report.figures import MeasuredShape
from mcgeo.report.tables import map_table
from mcgeo.runs.catalogue import KIND, CatalogueLiquid, catalogue_liquid
from mcgeo.runs.config import load_config, resolved
from mcgeo.runs.droplet import Droplet
from mcgeo.runs.hole import hole_image
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sampled import Sampled
from mcgeo.runs.scan import scan
from mcgeo.runs.scannable import Scannable
from mcgeo.runs.storage import as_liquid, read_result
from mcgeo.runs.table_file import without_contents
from mcgeo.sampling.measurement import BIN_WIDTH, PAIRS
from mcgeo.variational.variation import PROJECTED

Drawing = tuple[Axes, Mapping[str, Any]]

YAML_SUFFIXES = (".yaml", ".yml")
_DEFAULT_FORMATS = ("pdf", "png")
_SHELL_WIDTH = 0.05
_LARGEST_SHOWN_Q = 6.0
_ENERGY = "[e^2/(4 pi eps l_B) per electron]"


def run_plot(arguments: argparse.Namespace) -> tuple[str, int]:
    """``mcgeo plot``."""
    draw = plot_sweep.draw if arguments.what in plot_sweep.DRAWN else _draw
    axes, table, source, stem = draw(arguments)
    figure = axes.get_figure(root=True)
    assert isinstance(figure, Figure)
    written = figures.save_figure(
        figure,
        arguments.out / stem.name if arguments.out else stem,
        table,
        formats=tuple(arguments.format or _DEFAULT_FORMATS),
        metadata={"mcgeo": mcgeo.__version__, "figure": arguments.what, **source},
    )
    return "\n".join(str(file) for file in written), 0


def _draw(arguments: argparse.Namespace) -> tuple[Axes, Mapping[str, Any], dict[str, str], Path]:
    """A figure of one liquid, its table, its provenance, and its path without ending."""
    _refuse_sweep_options(arguments)
    path = result_file(arguments.file)
    result, keys, folder = _subject(path, arguments.allow_outside)
    if arguments.problem is not None:
        other = load_config(arguments.problem, allow_outside=arguments.allow_outside)
        keys.update(other.model_dump(mode="json", by_alias=True, include={"problem", "scan"}))
    if isinstance(result, CatalogueLiquid):
        axes, table = _of_catalogue(result, arguments.what, keys)
    elif arguments.what in COMMON:
        axes, table = COMMON[arguments.what](result)
    elif isinstance(result, Droplet):
        axes, table = _of_droplet(result, arguments.what, path, keys)
    else:
        axes, table = LIQUID[arguments.what](as_liquid(result, path), keys)
    configuration = json.dumps(without_contents({key: keys[key] for key in ("state", "problem")}))
    return axes, table, {"configuration": configuration, **_source(result, keys)}, folder / arguments.what


def _refuse_sweep_options(arguments: argparse.Namespace) -> None:
    given = [name for name in ("quantity", "along", "families", "at") if getattr(arguments, name)]
    if given:
        raise ConfigError([f"--{name} belongs to figures of a sweep, not to {arguments.what}" for name in given])


def _subject(path: Path, allow_outside: bool) -> tuple[Sampled | CatalogueLiquid, dict[str, Any], Path]:
    """What is drawn, the configuration it has, and where figures go.

    Raises
    ------
    StorageError
        If the file is a configuration whose liquid has to be sampled first, or no result file.
    """
    if path.suffix not in YAML_SUFFIXES:
        result = read_result(path)
        return result, dict(result.resolved), path.parent
    keys, folder = resolved(load_config(path, allow_outside=allow_outside)), default_folder(path)
    if keys["state"]["kind"] != KIND:
        raise StorageError(f"{path}: its liquid has to be sampled (mcgeo sample {path}); then plot {folder}")
    return catalogue_liquid(keys["state"]), keys, folder


def _source(result: Sampled | CatalogueLiquid, keys: Mapping[str, Any]) -> dict[str, str]:
    """Where the numbers come from."""
    if isinstance(result, CatalogueLiquid):
        return {"source": origin_text(result.state_summary())}
    return {"seed": str(keys["sampling"]["seed"])}


def _hole(liquid: Liquid | CatalogueLiquid, keys: Mapping[str, Any]) -> Drawing:
    found = scan(liquid, keys["problem"], keys["scan"])
    # Where the orbit varies, the map is that of its optimum.
    orbit = UnimodularMetric(found.orbit_stretch.value, found.orbit_angle.value)
    varied = found.variation.kind != PROJECTED
    seen = found.problem.with_mass(orbit) if varied else found.problem
    image = hole_image(liquid.occupations, seen, found.minimum)
    axes = figures.hole_map(
        image.x,
        image.y,
        image.g,
        contour_level=image.level,
        contour_radius=image.ellipse.radius if image.ellipse else 1.0,
        mass_metric=MeasuredShape(found.orbit_stretch, found.orbit_angle),
        mass_label="orbit" if varied else "mass orbit",
        hole_metric=MeasuredShape(found.minimum.stretch, found.minimum.angle),
        fitted_metric=MeasuredShape(image.stretch, image.angle) if image.ellipse else None,
    )
    return axes, map_table(image.x, image.y, image.g, ("x [l_B]", "y [l_B]", "g"))


def _energy(liquid: Scannable, keys: Mapping[str, Any]) -> Drawing:
    found = scan(liquid, keys["problem"], keys["scan"])
    curve, mass = found.curve, found.problem.mass_metric
    axes = figures.energy_curve(
        curve.stretch,
        curve.energy,
        curve.error,
        minimum=found.minimum,
        verdict=found.verdict,
        mass_stretch=mass.stretch * float(np.cos(2.0 * (mass.angle - curve.angle))),
        angle_degrees=float(np.degrees(curve.angle)),
        difference_error=curve.difference_error,
    )
    table = {
        "stretch": curve.stretch,
        f"energy {_ENERGY}": curve.energy,
        f"energy error {_ENERGY}": curve.error,
        f"error of the difference to the minimum {_ENERGY}": curve.difference_error,
    }
    return axes, table


def _structure(liquid: Liquid, keys: Mapping[str, Any]) -> Drawing:
    shown = liquid.norm < _LARGEST_SHOWN_Q
    curve = shell_means(liquid.norm[shown], liquid.structure_samples[:, shown], _SHELL_WIDTH)
    return _structure_and_fit(curve, liquid.occupations)


def _structure_and_fit(curve: Curve, occupations: PairOccupations) -> Drawing:
    fit_q = np.linspace(0.0, _LARGEST_SHOWN_Q, 301)
    fit_s = 1.0 + np.exp(-0.5 * fit_q**2) * (occupations.guiding_centre_structure(fit_q) - 1.0)
    small_q = np.linspace(0.0, 1.2, 61)
    axes = figures.structure_factor(
        curve.x, curve.value, curve.error, fit_q=fit_q, fit_s=fit_s, small_q=(small_q, 0.5 * small_q**2)
    )
    table = {"q [1/l_B]": curve.x, "S": curve.value, "S error": curve.error, "fit q [1/l_B]": fit_q, "fit S": fit_s}
    return axes, table


def _correlation(liquid: Liquid, keys: Mapping[str, Any]) -> Drawing:
    n = liquid.n_electrons
    radii = np.linspace(0.0, liquid.frame.isotropic.largest_radius, 201)
    curve = radial_pair_correlation(liquid.frame, liquid.q_max, n, liquid.structure_samples, radii)
    table = {"r [l_B]": curve.x, "g": curve.value, "g error": curve.error}
    if liquid.is_conjugate:
        # Pairs were counted among the holes.
        return figures.radial_pair_correlation(curve.x, curve.value, curve.error), table
    counts = liquid.independent(liquid.blocks.counts[PAIRS])
    counted = counted_pair_correlation(liquid.frame, n, BIN_WIDTH, counts, liquid.configurations_per_count)
    axes = figures.radial_pair_correlation(
        curve.x,
        curve.value,
        curve.error,
        histogram_r=counted.x,
        histogram_g=counted.value,
        histogram_error=counted.error,
    )
    table |= {"counted r [l_B]": counted.x, "counted g": counted.value, "counted g error": counted.error}
    return axes, table


def _occupations(liquid: Liquid | CatalogueLiquid, keys: Mapping[str, Any]) -> Drawing:
    found = liquid.occupations
    estimates = [found.occupation(index) for index in range(len(found.m))]
    n, error = np.array([e.value for e in estimates]), np.array([e.error for e in estimates])
    return figures.occupations(found.m, n, error), {"m": found.m, "n_m": n, "n_m error": error}


def _trace(result: Sampled) -> Drawing:
    blocks = result.blocks.trace.mean(axis=(0, 3))
    overall = mean_estimate(result.independent(blocks))
    axes = figures.block_trace(
        blocks,
        mean=overall.value,
        error=overall.error,
        tau=result.autocorrelation_time,
        label=r"Coulomb energy per electron $/\,(e^2/4\pi\varepsilon\ell_B)$",
    )
    table = {f"walker {index} {_ENERGY}": column for index, column in enumerate(blocks.T)}
    return axes, {"block": np.arange(1, len(blocks) + 1), **table}


def _of_catalogue(liquid: CatalogueLiquid, what: str, keys: Mapping[str, Any]) -> Drawing:
    drawn: dict[str, Callable[[CatalogueLiquid, Mapping[str, Any]], Drawing]] = {
        "hole": _hole,
        "energy": _energy,
        "structure": _catalogue_structure,
        "correlation": _bulk_correlation,
        "occupations": _occupations,
    }
    if what not in drawn:
        raise StorageError(f"of a liquid of the catalogue {', '.join(drawn)} can be drawn, not {what}")
    return drawn[what](liquid, keys)


def _catalogue_structure(liquid: CatalogueLiquid, keys: Mapping[str, Any]) -> Drawing:
    curve = liquid.structure
    shown = curve.x < _LARGEST_SHOWN_Q
    return _structure_and_fit(Curve(curve.x[shown], curve.value[shown], curve.error[shown]), liquid.occupations)


def _bulk_correlation(liquid: CatalogueLiquid, keys: Mapping[str, Any]) -> Drawing:
    """g(r) of the infinite liquid, to where its occupations are known."""
    found = liquid.occupations
    curve = bulk_radial_pair_correlation(found, np.linspace(0.0, 2.0 * np.sqrt(float(found.m[-1])), 201))
    label = "infinite liquid, from pair occupations"
    axes = figures.radial_pair_correlation(curve.x, curve.value, curve.error, label=label)
    return axes, {"r [l_B]": curve.x, "g": curve.value, "g error": curve.error}


def _of_droplet(droplet: Droplet, what: str, path: Path, keys: Mapping[str, Any]) -> Drawing:
    if what == "energy":
        return _energy(droplet, keys)
    if what != "density":
        raise StorageError(f"{path} holds a droplet, of which energy, density and trace can be drawn, not {what}")
    density = droplet.density
    radius = droplet.state.background.radius
    middle = 0.5 * (density.edges[1:] + density.edges[:-1])
    axes = figures.radial_density(
        middle, density.density, density.error, background=droplet.state.background.density, edge=radius
    )
    table = {"r' [l_B]": middle, "density [1/l_B^2]": density.density, "density error [1/l_B^2]": density.error}
    return axes, table


def _no_density(liquid: Liquid, keys: Mapping[str, Any]) -> Drawing:
    raise StorageError("a liquid on the torus is uniform: density is drawn of droplets only")


COMMON: dict[str, Callable[[Sampled], Drawing]] = {"trace": _trace}
LIQUID: dict[str, Callable[[Liquid, Mapping[str, Any]], Drawing]] = {
    "hole": _hole,
    "energy": _energy,
    "structure": _structure,
    "correlation": _correlation,
    "occupations": _occupations,
    "density": _no_density,
}
