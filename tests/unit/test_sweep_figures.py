"""Figures of a sweep: what is drawn is what the table holds, marks say what a point is worth."""

import csv
import math

import numpy as np
import pytest

from mcgeo.cli import main
from mcgeo.errors import ConfigError, StorageError
from mcgeo.report.labels import key_label, quantity_label, value_label
from mcgeo.report.sweep_figure import Family, SweptAxis, aspect_curves, sweep_curves
from mcgeo.report.sweep_map import cell_edges, sweep_map
from mcgeo.runs.sweep_file import write_sweep_file
from mcgeo.runs.sweep_grid import error_name, read_sweep_grid
from mcgeo.runs.sweep_table import SweepTable, SweptColumn

RATIOS = np.array([1.0, 2.0, 4.0, 8.0])
WIDTHS = np.array([0.5, 3.0, 1.0])
INTERACTIONS = np.array(['{"kind": "coulomb"}', '{"kind": "square_well", "width_nm": 12}'], dtype=object)
ANGLES = np.array([0.0, 30.0])


def _table():
    """Mass ratio by width by interaction, the angle with that; one point is missing, one unstable, one short."""
    shape = (len(RATIOS), len(WIDTHS), len(INTERACTIONS))
    index = np.indices(shape).reshape(3, -1)
    mass = 0.5 * np.log(RATIOS[index[0]])
    stretch = mass * (0.4 + 0.1 * index[1]) + 0.01 * index[2]
    verdict = np.where(index[1] == 1, "soft", "stable").astype(object)
    verdict[np.all(index.T == [3, 1, 0], axis=1)] = "unstable"
    run = np.full(len(mass), "converged", dtype=object)
    run[np.all(index.T == [2, 0, 0], axis=1)] = "short"
    kept = ~np.all(index.T == [3, 2, 0], axis=1)
    columns = {
        "stretch": stretch,
        "stretch_error": np.full(len(mass), 0.01),
        "aspect_ratio": np.exp(stretch),
        "aspect_ratio_error": np.exp(stretch) * 0.01,
        "mass_stretch": mass,
        "shape_verdict": verdict,
        "run_verdict": run,
        "version": np.full(len(mass), "1", dtype=object),
        "liquid": np.full(len(mass), "ab", dtype=object),
    }
    return SweepTable(
        [
            [SweptColumn("problem.mass.ratio", "1", RATIOS)],
            [SweptColumn("problem.interaction.width", "l_B", WIDTHS)],
            [
                SweptColumn("problem.interaction", "1", INTERACTIONS),
                SweptColumn("problem.mass.angle_degrees", "degrees", ANGLES),
            ],
        ],
        ["logarithmic", "list", "list"],
        np.flatnonzero(kept),
        np.full(int(kept.sum()), "done"),
        {},
        {name: values[kept] for name, values in columns.items()},
        {"state": {"kind": "laughlin"}},
    )


@pytest.fixture
def folder(tmp_path):
    write_sweep_file(tmp_path / "sweep.h5", _table())
    return tmp_path


def _rows(path):
    lines = [line for line in path.read_text().splitlines() if not line.startswith("#")]
    return list(csv.DictReader(lines))


def test_a_grid_is_read_as_it_was_written(folder):
    table, grid = _table(), read_sweep_grid(folder / "sweep.h5")
    assert [[column.name for column in axis] for axis in grid.axes] == [[c.name for c in axis] for axis in table.axes]
    assert [[column.unit for column in axis] for axis in grid.axes] == [[c.unit for c in axis] for axis in table.axes]
    assert grid.spacings == table.spacings
    for name in ("stretch", "shape_verdict"):
        np.testing.assert_array_equal(grid.columns[name].ravel()[table.positions], table.columns[name])
    assert np.isnan(grid.columns["stretch"][3, 2, 0])
    np.testing.assert_array_equal(grid.axes[2][1].values, ANGLES)
    assert grid.configuration == '{"state": {"kind": "laughlin"}}'


def test_files_that_are_none(tmp_path):
    with pytest.raises(StorageError, match="no such file"):
        read_sweep_grid(tmp_path / "sweep.h5")
    (tmp_path / "sweep.h5").write_bytes(b"no table")
    with pytest.raises(StorageError, match="damaged or no table"):
        read_sweep_grid(tmp_path / "sweep.h5")


def test_a_fixed_value_takes_its_part(folder):
    grid = read_sweep_grid(folder / "sweep.h5").fixed({"width": "3", "angle_degrees": "30"})
    assert grid.columns["stretch"].shape == (4, 1, 1)
    np.testing.assert_allclose(grid.columns["stretch"].ravel(), 0.5 * np.log(RATIOS) * 0.5 + 0.01)
    assert grid.place("problem.interaction")[1].values.tolist() == [INTERACTIONS[1]]


@pytest.mark.parametrize(
    ("at", "said"),
    [
        ({"width": "2"}, "none of its values: 0.5, 3, 1"),
        ({"field": "1"}, "no swept key"),
        ({"degrees": "0"}, "no swept"),
    ],
)
def test_values_and_keys_that_are_not_swept(folder, at, said):
    with pytest.raises(ConfigError, match=said):
        read_sweep_grid(folder / "sweep.h5").fixed(at)


@pytest.mark.parametrize(
    ("quantity", "error"),
    [
        ("stretch", "stretch_error"),
        ("angle_degrees", "angle_error"),
        ("energy_mev", "energy_error_mev"),
        ("gain_mass_kelvin", "gain_mass_error_kelvin"),
        ("stiffness_along_mev_per_nm2", "stiffness_along_mev_per_nm2_error"),
    ],
)
def test_where_the_error_of_a_quantity_stands(quantity, error):
    assert error_name(quantity) == error


def test_curves_by_the_command(folder):
    code = main(["plot", "sweep", str(folder), "--along", "ratio", "--at", "angle_degrees=0", "--format", "svg"])
    assert code == 0
    rows = _rows(folder / "curves_stretch.csv")
    assert len(rows) == len(RATIOS) * len(WIDTHS)
    assert float(rows[5]["stretch"]) == pytest.approx(0.5 * math.log(2.0) * 0.5)
    assert [row["problem.interaction.width [l_B]"] for row in rows[:5]] == ["0.5"] * 4 + ["3.0"]
    assert rows[11]["stretch"] == "nan"
    # The words at the axes are text in the file.
    drawn = (folder / "curves_stretch.svg").read_text()
    for words in ("mass ratio", "unstable shape", "soft shape", "run not converged"):
        assert words in drawn


def test_a_figure_never_takes_the_place_of_the_table(folder):
    (folder / "sweep.csv").write_text("the table")
    for figure in (["sweep"], ["map"], ["aspects"]):
        assert main(["plot", *figure, str(folder), "--at", "angle_degrees=30", "--format", "png"]) == 0
    assert (folder / "sweep.csv").read_text() == "the table"
    assert {path.name for path in folder.glob("*.png")} == {"curves_stretch.png", "map_stretch.png", "aspects.png"}


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["sweep"], "more keys are swept than one figure shows"),
        (["sweep", "--at", "width"], "--at width: must be KEY=VALUE"),
        (["sweep", "--at", "width=1", "--quantity", "colour"], "colour: no quantity of this sweep; it has stretch"),
        (["map", "--at", "width=1", "--at", "angle_degrees=0"], "a map needs two swept keys"),
        (["aspects", "--quantity", "energy"], "use plot sweep"),
        (["aspects", "--at", "ratio=2"], "aspects need a sweep over the mass"),
        (["sweep", "--along", "angle_degrees", "--families", "interaction", "--at", "width=1"], "changes together"),
        (["hole", "--along", "width"], "--along belongs to figures of a sweep"),
    ],
)  # fmt: skip
def test_choices_that_leave_no_figure(folder, capsys, options, said):
    assert main(["plot", options[0], str(folder), *options[1:]]) == 2
    assert said in capsys.readouterr().err
    assert [path.name for path in folder.iterdir()] == ["sweep.h5"]


def _family(value, verdicts, converged=True):
    n = len(verdicts)
    x = np.arange(1.0, n + 1.0)
    return Family(value, x, x**0.5, np.full(n, 0.1), np.array(verdicts, dtype=object), np.full(n, converged))


AXIS = SweptAxis("mass ratio", False, [], [1.0, 2.0, 3.0])


def _curves(*families):
    return sweep_curves(families, along=AXIS, ylabel="stretch", family_label="width", title="")


def test_no_line_leads_to_an_unstable_shape():
    axes = _curves(_family(None, ["stable", "soft", "unstable"]))
    line = axes.lines[0].get_ydata()
    np.testing.assert_allclose(line, [1.0, 2.0**0.5, np.nan])
    faces = [container.lines[0].get_markerfacecolor() for container in axes.containers]
    assert faces == ["C0", "C0", "white"]
    assert [text.get_text() for text in axes.get_legend().get_texts()] == ["soft shape", "unstable shape"]


def test_error_bars_are_one_standard_error():
    axes = _curves(_family(None, ["stable"] * 3))
    (bars,) = axes.containers[0].lines[2]
    lengths = [segment[1, 1] - segment[0, 1] for segment in bars.get_segments()]
    np.testing.assert_allclose(lengths, 0.2)
    assert axes.get_legend() is None


def test_runs_that_have_not_converged_are_crossed():
    axes = _curves(_family(1.0, ["stable"] * 2, converged=False), _family(2.0, ["stable"] * 2))
    assert [line.get_marker() for line in axes.lines].count("x") == 2
    crossed = [line for line in axes.lines if line.get_marker() == "x" and len(line.get_xdata())]
    assert len(crossed) == 1
    assert "run not converged" in [text.get_text() for text in axes.get_legend().get_texts()]


def test_the_square_root_law_is_a_guide():
    axes = aspect_curves([_family(None, ["stable"] * 3)], family_label="", title="")
    (law,) = [line for line in axes.lines if line.get_label() == "square-root law"]
    np.testing.assert_allclose(law.get_ydata(), np.sqrt(law.get_xdata()))
    assert (axes.get_xscale(), axes.get_yscale()) == ("log", "log")


def test_cells_of_a_map_meet_halfway():
    np.testing.assert_allclose(cell_edges(SweptAxis("", False, [], [1.0, 2.0, 4.0])), [0.5, 1.5, 3.0, 5.0])
    np.testing.assert_allclose(cell_edges(SweptAxis("", True, [], [1.0, 4.0])), [0.5, 2.0, 8.0])
    np.testing.assert_allclose(cell_edges(SweptAxis("", False, ["a", "b"], [])), [-0.5, 0.5, 1.5])


def test_a_map_says_where_shapes_change_and_results_are_missing():
    values = np.array([[0.1, 0.2, 0.3], [0.2, 0.4, np.nan]])
    verdict = np.array([["stable", "soft", "soft"], ["stable", "unstable", ""]], dtype=object)
    axes = sweep_map(
        values, verdict, along=AXIS, across=SweptAxis("width", False, [], [1.0, 2.0]), label="stretch", title=""
    )
    words = [text.get_text() for text in axes.get_legend().get_texts()]
    assert words == ["soft shape", "unstable shape", "no result"]
    cells = axes.collections[0].get_array()
    np.testing.assert_array_equal(np.ma.getmaskarray(cells).ravel(), ~np.isfinite(values).ravel())
    # Borders: stable|soft and stable|unstable, unstable|nothing; soft over unstable, soft over nothing.
    assert len(axes.collections[-1].get_segments()) == 5


def test_labels():
    assert key_label("problem.interaction.width_nm", "nm") == "width $w$ / nm"
    assert key_label("problem.interaction.screening", "1/l_B") == r"screening / $1/\ell_B$"
    assert quantity_label("gain_mass_mev", "meV per electron") == "gain over a hole like the mass\n/ meV per electron"
    assert value_label('{"kind": "square_well", "width_nm": 12}') == "square well, width 12 nm"
    assert value_label(np.float64(0.25)) == "0.25"
