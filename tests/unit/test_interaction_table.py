"""Tables: known interactions are found again, in energies too, and what is wrong with a file is told with its line."""

import itertools
import math

import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.dipole import Dipole
from mcgeo.problem.finite_width import FangHoward, Softened
from mcgeo.problem.screened import TwoGates
from mcgeo.problem.table import GridTable, IsotropicTable, tabulated
from mcgeo.problem.table_text import HEADERS, TableError, parse_table

STEPS = 0.05 * np.arange(1, 261)
GRID = 0.1 * np.arange(-90, 91)


def isotropic_text(radial, q=STEPS):
    rows = (f"{k!r},{float(radial(np.array(k)))!r}" for k in np.asarray(q).tolist())
    return "\n".join([HEADERS[0], *rows])


def grid_text(potential, axis=GRID):
    points = np.array(list(itertools.product(axis, axis)))
    points[np.all(np.abs(points) < 1e-9, axis=1)] = 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        values = potential(points)
    rows = (f"{x!r},{y!r},{v!r}" for (x, y), v in zip(points.tolist(), values.tolist(), strict=True))
    return "\n".join([HEADERS[1], *rows])


def made(content):
    return tabulated({"name": "v.csv", "content": content})


@pytest.mark.parametrize("interaction", [Softened(1.0), FangHoward(2.0), TwoGates(1.5), Coulomb()])
def test_isotropic_table(interaction):
    radial = getattr(interaction, "radial", lambda k: 2.0 * math.pi / k)
    table = made(isotropic_text(radial))
    assert isinstance(table, IsotropicTable)
    assert table.name == "table v.csv"
    # Between the rows, below the first and beyond the last, up to twice as far.
    for q, tolerance in [(np.linspace(0.06, 12.9, 77), 1e-6), (np.array([1e-6, 0.01, 0.03]), 5e-5)]:
        np.testing.assert_allclose(q * table.radial(q), q * radial(q), atol=tolerance)
    far = np.linspace(13.1, 26.0, 20)
    np.testing.assert_allclose(far * table.radial(far), far * radial(far), atol=0.02)
    for tau, n_flux in [(1j, 20), (complex(0.3, 2.0), 60)]:
        cell = Cell.from_tau(tau, n_flux)
        assert table.self_energy(cell) == pytest.approx(interaction.self_energy(cell), abs=2e-7)


@pytest.mark.parametrize(
    ("interaction", "tolerance"),
    [
        (Coulomb(UnimodularMetric(0.7, 0.4)), 1e-13),
        (Softened(0.8), 3e-5),
        (Dipole(0.4, 0.8, 0.3), 4e-5),
        (TwoGates(1.0), 2e-4),
    ],
)
def test_grid_table(interaction, tolerance):
    table = made(grid_text(interaction.potential))
    assert isinstance(table, GridTable)
    assert table.symmetry is None
    rng = np.random.default_rng(3)
    directions = rng.normal(size=(400, 2))
    directions /= np.hypot(*directions.T)[:, None]
    for norms, bound in [(rng.uniform(0.6, 8.9, 400), 5e-6), (rng.uniform(1e-6, 0.6, 400), tolerance)]:
        q = norms[:, None] * directions
        error = norms * np.abs(table.potential(q) - interaction.potential(q)) / (2.0 * math.pi)
        assert error.max() < bound
    # A wave and its opposite are one.
    np.testing.assert_allclose(table.potential(q), table.potential(-q), rtol=1e-9)
    stacked = table.potential(q.reshape(20, 20, 2))
    np.testing.assert_array_equal(stacked.ravel(), table.potential(q))
    cell = Cell.from_tau(complex(0.3, 1.1), 30)
    assert table.self_energy(cell) == pytest.approx(interaction.self_energy(cell), abs=1e-5)


def test_comments_spaces_and_quotes_do_not_matter():
    text = "# units as stated\n\n" + HEADERS[0].replace(" ", "") + "\n\n" + isotropic_text(Softened(1.0).radial)[34:]
    assert parse_table(text).axes == parse_table(isotropic_text(Softened(1.0).radial)).axes


def edited(content, line, new):
    lines = content.split("\n")
    if new is None:
        del lines[line - 1]
    else:
        lines[line - 1] = new
    return "\n".join(lines)


PLAIN = isotropic_text(Softened(1.0).radial)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "the table is empty"),
        ("# nothing\n", "the table is empty"),
        (edited(PLAIN, 1, "q,V"), "line 1: the header must be 'q [1/l_B], V [e^2 l_B/(4 pi eps)]' or 'q_x "),
        (edited(PLAIN, 1, "q [1/nm], V [meV nm^2]"), "to state the units, not 'q [1/nm], V [meV nm^2]'"),
        (edited(PLAIN, 5, "0.2"), "line 5: must hold 2 finite numbers, not '0.2'"),
        (edited(PLAIN, 5, "0.2,a"), "line 5: must hold 2 finite numbers"),
        (edited(PLAIN, 5, "0.2,nan"), "line 5: must hold 2 finite numbers"),
        (edited(PLAIN, 5, "0.1,3.0"), "line 5: q must ascend, but 0.1 follows 0.15"),
        (edited(PLAIN, 2, "0,3.0"), "line 2: the first q must be above 0 and at most 0.25, not 0"),
        (isotropic_text(Softened(1.0).radial, STEPS[6:]), "line 2: the first q must be above 0 and at most 0.25"),
        (isotropic_text(Softened(1.0).radial, STEPS[:150]), "line 151: the last q must be at least 10, not 7.5"),
        (isotropic_text(Softened(1.0).radial, [0.1, 0.4, 0.95, 1.3, 2, 3, 4, 11]), "line 4: a step of q must be"),
        (isotropic_text(Softened(1.0).radial, [0.1]), "needs 8 rows at least, not 1"),
        (edited(PLAIN, 101, "5.0,0.1"), "line 101: V is not smooth here"),
        (isotropic_text(TwoGates(10.0).radial), "V changes too much between the points of smallest q"),
    ],
)
def test_faults_of_an_isotropic_table(text, message):
    with pytest.raises(TableError) as caught:
        parse_table(text)
    assert message in str(caught.value)


COARSE = 0.2 * np.arange(-40, 41)
SQUARE = grid_text(Softened(0.5).potential, COARSE)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (edited(SQUARE, 50, None), "must hold every point of a grid of 81 values of q_x and 81 of q_y once"),
        (edited(SQUARE, 50, "-8.0,1.6,inf"), "line 50: must hold 3 finite numbers"),
        (grid_text(Softened(0.5).potential, 0.2 * np.arange(-30, 31)), "must reach from -8 to 8 at least"),
        (grid_text(Softened(0.5).potential, 0.4 * np.arange(-30, 31)), "in steps of at most 0.25, in q_x"),
        (grid_text(Softened(0.5).potential, 0.2 * np.arange(-40, 46)), "symmetric about 0, in q_x"),
        (grid_text(Softened(0.5).potential, 0.2 * np.arange(-45, 45) + 0.1), "symmetric about 0, in q_x"),
        (grid_text(TwoGates(6.0).potential, COARSE), "V changes too much between the points of smallest q"),
        (grid_text(lambda q: 1.0 + 0.01 * q[:, 0], COARSE), "V(-q) must be V(q)"),
    ],
)
def test_faults_of_a_grid(text, message):
    with pytest.raises(TableError) as caught:
        parse_table(text)
    assert message in str(caught.value)


def test_a_wrong_point_of_a_grid_is_found():
    def spoilt(q):
        values = Softened(0.5).potential(q)
        for sign in (-1.0, 1.0):
            values[np.all(np.abs(q - sign * np.array([2.0, 1.0])) < 1e-6, axis=1)] *= 1.3
        return values

    with pytest.raises(TableError, match="not smooth") as caught:
        parse_table(grid_text(spoilt, COARSE))
    line = int(str(caught.value).split()[1].rstrip(":"))
    x, y, _ = (float(cell) for cell in grid_text(spoilt, COARSE).split("\n")[line - 1].split(","))
    assert math.hypot(abs(x) - 2.0, abs(y) - 1.0) < 0.5
    parse_table(SQUARE)


def test_the_origin_of_a_grid_may_be_left_out():
    origin = 2 + 40 * 81 + 40
    assert SQUARE.split("\n")[origin - 1].startswith("0.0,0.0,")
    table = made(edited(SQUARE, origin, None))
    q = np.array([[0.3, 0.4], [3.0, -2.0]])
    np.testing.assert_array_equal(table.potential(q), made(SQUARE).potential(q))
