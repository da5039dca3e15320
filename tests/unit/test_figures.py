"""Figures: what is drawn is the data given, files are whole and reproducible."""

import io
import math
import subprocess
import sys
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from matplotlib.collections import FillBetweenPolyCollection, QuadMesh
from matplotlib.contour import QuadContourSet
from matplotlib.figure import Figure

from mcgeo.estimate.statistics import Estimate
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.report import figures
from mcgeo.report.tables import map_table
from mcgeo.variational.minimum import Minimum


def _line(axes, start):
    """Data, shape (n, 2), of the one line or error bar whose label starts so."""
    handles, labels = axes.get_legend_handles_labels()
    (found,) = [handle for handle, label in zip(handles, labels, strict=True) if label.startswith(start)]
    return np.asarray(getattr(found, "lines", [found])[0].get_xydata())


def _bar_lengths(axes, start):
    """Full length of every vertical error bar of the series."""
    handles, labels = axes.get_legend_handles_labels()
    (found,) = [handle for handle, label in zip(handles, labels, strict=True) if label.startswith(start)]
    return np.array([bar[1, 1] - bar[0, 1] for bar in found.lines[2][-1].get_segments()])


def _shape(aspect_ratio, angle, stretch_error=0.0, angle_error=0.0):
    metric = UnimodularMetric.from_aspect_ratio(aspect_ratio, angle)
    return figures.MeasuredShape(Estimate(metric.stretch, stretch_error), Estimate(metric.angle, angle_error))


def _hole(metric, x, y):
    points = np.stack(np.meshgrid(x, y), axis=-1)
    return 1.0 - np.exp(-0.25 * metric.position_norm_sq(points))


def _hole_axes(aspect_ratio=4.0, angle=0.5, level=0.5, fitted=True):
    x, y = np.linspace(-6.0, 6.0, 61), np.linspace(-5.0, 5.0, 41)
    shape = _shape(aspect_ratio, angle, 0.01, 0.002)
    g = _hole(shape.metric, x, y)
    # 1 - exp(-r^2/4) = 1/2 at r^2 = 4 log 2.
    axes = figures.hole_map(
        x, y, g, contour_level=level, contour_radius=2.0 * math.sqrt(math.log(2.0)),
        mass_metric=_shape(9.0, -0.3), hole_metric=shape, fitted_metric=shape if fitted else None,
    )  # fmt: skip
    return axes, g


def _minimum(**changes):
    metric = UnimodularMetric(0.4, 0.0)
    minimum = Minimum(
        metric=metric, interior=True, stretch=Estimate(0.4, 0.02), angle=Estimate(0.0, 0.0),
        energy=Estimate(-0.41, 0.0003), stiffness=np.array([[0.07, 0.01], [0.01, 0.03]]),
        stiffness_error=np.array([[0.002, 0.001], [0.001, 0.004]]),
        stiffness_along=Estimate(0.07, 0.002), stiffness_across=Estimate(0.03, 0.004),
        gain_isotropic=Estimate(0.0056, 0.0002), gain_mass=Estimate(0.0012, 0.0001),
    )  # fmt: skip
    return replace(minimum, **changes)


def _energy_axes(minimum, verdict="stable", angle_degrees=0.0, difference_error=True):
    q = np.linspace(-0.3, 1.1, 29)
    energy = -0.41 + 0.035 * (q - 0.4) ** 2
    error = np.full(29, 0.002)
    return figures.energy_curve(
        q, energy, error, minimum=minimum, verdict=verdict, mass_stretch=0.9, angle_degrees=angle_degrees,
        difference_error=1e-4 * np.abs(q - 0.4) if difference_error else None,
    )  # fmt: skip


class TestHoleMap:
    def test_map_is_data_rasterised_and_centred_at_one(self):
        axes, g = _hole_axes()
        (mesh,) = [artist for artist in axes.collections if isinstance(artist, QuadMesh)]
        np.testing.assert_array_equal(mesh.get_array(), g)
        assert mesh.get_rasterized()
        assert mesh.norm.vcenter == 1.0
        assert axes.get_aspect() == 1.0

    def test_ellipses_obey_their_metrics_and_enclose_one_area(self):
        axes, _ = _hole_axes()
        for start, shape in (("mass", _shape(9.0, -0.3)), ("guiding", _shape(4.0, 0.5)), ("fitted", _shape(4.0, 0.5))):
            (line,) = [line for line in axes.lines if line.get_label().startswith(start)]
            norm = shape.metric.position_norm_sq(line.get_xydata())
            np.testing.assert_allclose(norm, 4.0 * math.log(2.0), rtol=1e-12)

    def test_contour_of_data_lies_on_fitted_ellipse(self):
        axes, _ = _hole_axes()
        (contour,) = [artist for artist in axes.collections if isinstance(artist, QuadContourSet)]
        norm = _shape(4.0, 0.5).metric.position_norm_sq(contour.get_paths()[0].vertices)
        np.testing.assert_allclose(norm, 4.0 * math.log(2.0), rtol=0.02)

    def test_level_outside_map_and_open_contour(self):
        axes, _ = _hole_axes(level=1.7, fitted=False)
        assert not [artist for artist in axes.collections if isinstance(artist, QuadContourSet)]
        texts = [text.get_text() for text in axes.get_legend().get_texts()]
        assert len(texts) == 2
        assert texts[1].startswith("guiding-centre hole")

    @pytest.mark.parametrize(
        ("shape", "words"),
        [
            (_shape(4.0, math.radians(30.0), 0.01, math.radians(0.25)), "4.00(4), 30.0(2)°"),
            (_shape(4.0, -0.3), "4, -17.19°"),
            (_shape(1.0, 0.0, 0.02, math.inf), "1.00(2), circle"),
            (_shape(1.01, 0.2, 0.02, 1.1), "1.01(2), direction unknown"),
            (figures.MeasuredShape.exact(ISOTROPIC), "1, circle"),
        ],
    )
    def test_words(self, shape, words):
        assert shape.words == words


class TestEnergyCurve:
    def test_curve_bands_and_minimum(self):
        axes = _energy_axes(_minimum())
        curve = _line(axes, "$E(Q)$")
        bands = [artist for artist in axes.collections if isinstance(artist, FillBetweenPolyCollection)]
        for band, width in zip(bands, (np.full(29, 0.004), 2e-4 * np.abs(curve[:, 0] - 0.4)), strict=True):
            vertices = band.get_paths()[0].vertices
            at_end = vertices[np.isclose(vertices[:, 0], 1.1), 1]
            assert np.ptp(at_end) == pytest.approx(width[-1])
        np.testing.assert_allclose(_line(axes, "minimum"), [[0.4, -0.41]])
        assert _bar_lengths(axes, "minimum") == pytest.approx([0.0006])

    def test_parabola_is_that_of_the_stiffness(self):
        parabola = _line(_energy_axes(_minimum()), "stiffness")
        np.testing.assert_allclose(parabola[:, 1], -0.41 + 0.5 * 0.07 * (parabola[:, 0] - 0.4) ** 2, rtol=1e-12)

    def test_stiffness_across_on_the_diagonal(self):
        minimum = _minimum(metric=UnimodularMetric(0.4, math.pi / 4), angle=Estimate(math.pi / 4, 0.01))
        parabola = _line(_energy_axes(minimum, angle_degrees=45.0), "stiffness $K=0.030(4)$")
        np.testing.assert_allclose(parabola[:, 1], -0.41 + 0.5 * 0.03 * (parabola[:, 0] - 0.4) ** 2, rtol=1e-12)

    def test_perpendicular_minimum_has_negative_stretch(self):
        minimum = _minimum(metric=UnimodularMetric(-0.4, 0.0), angle=Estimate(math.pi / 2, 0.0))
        axes = _energy_axes(minimum, verdict="unstable")
        assert _line(axes, "minimum")[0, 0] == pytest.approx(-0.4)
        assert axes.get_title(loc="left").startswith("unstable")
        assert "90°" in axes.get_title(loc="left")

    def test_minimum_off_the_line_has_no_parabola(self):
        minimum = _minimum(metric=UnimodularMetric(0.4, 0.3))
        labels = _energy_axes(minimum).get_legend_handles_labels()[1]
        assert "minimum, off this line" in labels
        assert not [label for label in labels if label.startswith("stiffness")]

    @pytest.mark.parametrize("minimum", [None, _minimum(interior=False)])
    def test_no_minimum_no_mark(self, minimum):
        axes = _energy_axes(minimum, verdict="unstable", difference_error=False)
        assert not [label for label in axes.get_legend_handles_labels()[1] if label.startswith("minimum")]
        assert ("no minimum inside" in axes.get_title(loc="left")) == (minimum is not None)

    def test_findings_carry_errors(self):
        title = _energy_axes(_minimum()).get_title(loc="left")
        for words in ("stable", "0.40(2)", "1.49(3)", "0.0056(2)", "0.00120(10)"):
            assert words in title

    def test_marks_and_top_axis(self):
        axes = _energy_axes(_minimum())
        assert _line(axes, "isotropic")[:, 0] == pytest.approx([0.0, 0.0])
        assert _line(axes, "hole shaped")[:, 0] == pytest.approx([0.9, 0.9])
        (top,) = axes.child_axes
        ticks = dict(zip(top.get_xticks(), [label.get_text() for label in top.get_xticklabels()], strict=True))
        assert len(ticks) >= 4
        for position, words in ticks.items():
            numerator, _, denominator = words.partition("/")
            assert math.exp(position) == pytest.approx(float(numerator) / float(denominator or 1.0))

    def test_frame_follows_the_shape_not_the_common_error(self):
        low, high = _energy_axes(_minimum()).get_ylim()
        assert -0.412 < low < -0.41
        assert high < -0.39


class TestLiquid:
    def test_structure_factor(self):
        q = np.linspace(0.3, 6.0, 30)
        s, error = 1.0 - np.exp(-(q**2) / 2), np.full(30, 0.01)
        small = np.linspace(0.0, 1.0, 11)
        axes = figures.structure_factor(q, s, error, fit_q=q, fit_s=s + 0.1, small_q=(small, small**2 / 2))
        np.testing.assert_array_equal(_line(axes, "sampled"), np.stack([q, s], axis=-1))
        np.testing.assert_allclose(_bar_lengths(axes, "sampled"), 0.02)
        np.testing.assert_array_equal(_line(axes, "fit"), np.stack([q, s + 0.1], axis=-1))
        np.testing.assert_array_equal(_line(axes, "$q^2/2$")[:, 1], small**2 / 2)

    def test_occupations(self):
        m, n, error = np.array([1, 3, 5]), np.array([0.0, 1.51, 0.98]), np.array([0.0, 0.01, 0.03])
        axes = figures.occupations(m, n, error)
        np.testing.assert_array_equal(_line(axes, "$n_m$"), np.stack([m, n], axis=-1))
        np.testing.assert_allclose(_bar_lengths(axes, "$n_m$"), 2.0 * error)
        assert _line(axes, "uncorrelated")[:, 1] == pytest.approx([1.0, 1.0])
        assert "poorly determined" in axes.get_legend().get_title().get_text()

    def test_radial_pair_correlation_leaves_empty_bins_blank(self):
        r = np.linspace(0.0, 6.0, 50)
        g = 1.0 - np.exp(-(r**2) / 2)
        bins = np.array([0.05, 0.5, 1.0])
        axes = figures.radial_pair_correlation(
            r, g, np.full(50, 0.01), histogram_r=bins, histogram_g=np.array([0.0, 0.1, 0.4]),
            histogram_error=np.array([0.0, 0.02, 0.03]),
        )  # fmt: skip
        np.testing.assert_array_equal(_line(axes, "from")[:, 1], g)
        np.testing.assert_array_equal(_line(axes, "counted"), [[0.5, 0.1], [1.0, 0.4]])

    def test_block_trace(self):
        blocks = np.random.default_rng(3).normal(-0.41, 0.002, (20, 8))
        axes = figures.block_trace(blocks, mean=-0.41, error=0.0002, tau=3.25, label="E")
        drawn = np.stack([line.get_ydata() for line in axes.lines[:8]], axis=-1)
        np.testing.assert_array_equal(drawn, blocks)
        np.testing.assert_array_equal(_line(axes, "mean over")[:, 1], blocks.mean(axis=1))
        np.testing.assert_allclose(
            _bar_lengths(axes, "mean over"), 2.0 * blocks.std(axis=1, ddof=1) / math.sqrt(8), rtol=1e-9
        )
        (band,) = axes.patches
        assert (band.get_y(), band.get_height()) == pytest.approx((-0.4102, 0.0004))
        assert "-0.4100(2)" in axes.get_title(loc="left")
        assert "3.25 sweeps" in axes.get_title(loc="left")

    def test_one_walker_has_no_mean_over_walkers(self):
        axes = figures.block_trace(np.arange(5.0)[:, None], mean=2.0, error=0.7, tau=1.0, label="E")
        assert "mean over walkers" not in axes.get_legend_handles_labels()[1]


class TestStyle:
    def test_settings_of_others_stay(self):
        before = dict(matplotlib.rcParams)
        _hole_axes()
        assert dict(matplotlib.rcParams) == before

    def test_given_axes_are_used(self):
        axes = figures.new_axes(columns=2, height=2.0)
        assert tuple(axes.figure.get_size_inches()) == (7.0, 2.0)
        assert figures.occupations(np.array([1]), np.array([0.5]), np.array([0.1]), axes) is axes
        panels = figures.new_panels(2, 3.0)
        assert panels[0].figure is panels[1].figure

    def test_text_stays_inside_the_figure(self):
        for axes in (_hole_axes()[0], _energy_axes(_minimum())):
            figure = axes.figure
            figure.draw_without_rendering()
            box = figure.get_tightbbox()
            width, height = figure.get_size_inches()
            assert box.x0 > -0.01 and box.y0 > -0.01 and box.x1 < width + 0.01 and box.y1 < height + 0.01

    def test_pyplot_is_not_imported(self):
        code = "import sys, mcgeo.report.figures; sys.exit('matplotlib.pyplot' in sys.modules)"
        assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


class TestSaving:
    metadata: dict = {"seed": "7", "version": "0.1.0"}  # noqa: RUF012

    def test_files_and_table(self, tmp_path):
        axes, g = _hole_axes()
        x, y = np.linspace(-6.0, 6.0, 61), np.linspace(-5.0, 5.0, 41)
        table = map_table(x, y, g, ("x [l_B]", "y [l_B]", "g"))
        paths = figures.save_figure(axes.figure, tmp_path / "new" / "hole_0.5", table, metadata=self.metadata)
        assert [path.name for path in paths] == [f"hole_0.5.{ending}" for ending in ("pdf", "png", "svg", "csv")]
        lines = paths[-1].read_text().splitlines()
        assert lines[:2] == ["# seed: 7; version: 0.1.0", "x [l_B],y [l_B],g"]
        numbers = np.loadtxt(io.StringIO("\n".join(lines[2:])), delimiter=",")
        np.testing.assert_array_equal(numbers[:, 2].reshape(41, 61), g)
        np.testing.assert_array_equal(numbers[:61, 0], x)
        np.testing.assert_array_equal(numbers[::61, 1], y)
        assert sorted(path.name for path in (tmp_path / "new").iterdir()) == sorted(path.name for path in paths)

    def test_text_is_text_and_provenance_inside(self, tmp_path):
        axes = _energy_axes(_minimum())
        _, svg, _ = figures.save_figure(axes.figure, tmp_path / "e", {}, formats=("pdf", "svg"), metadata=self.metadata)
        assert ">hole shaped as the mass</text>" in svg.read_text()
        assert "seed: 7; version: 0.1.0" in svg.read_text()
        assert b"seed: 7" in (tmp_path / "e.pdf").read_bytes()

    @pytest.mark.parametrize(
        ("build", "formats"),
        [(lambda: _hole_axes()[0], ("pdf", "svg")), (lambda: _energy_axes(_minimum()), ("svg",))],
    )
    def test_bytes_repeat(self, tmp_path, build, formats):
        axes = build()
        first, again, fresh = (
            figures.save_figure(figure, tmp_path / name, {}, formats=formats, metadata=self.metadata)
            for name, figure in (("a", axes.figure), ("b", axes.figure), ("c", build().figure))
        )
        for one, two, three in zip(first, again, fresh, strict=True):
            assert one.read_bytes() == two.read_bytes() == three.read_bytes(), one.suffix

    def test_failed_rendering_writes_nothing(self, tmp_path):
        with pytest.raises(ValueError, match="tiff"):
            figures.save_figure(Figure(), tmp_path / "a", {}, formats=("svg", "tiff"), metadata={})
        with pytest.raises(ValueError, match="dimensions"):
            figures.save_figure(Figure(), tmp_path / "a", {"g": np.eye(2)}, formats=("svg",), metadata={})
        assert list(tmp_path.iterdir()) == []
