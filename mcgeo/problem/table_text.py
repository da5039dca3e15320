"""Reading and checking a table of V(q), without numerical libraries: a configuration is refused before anything loads.

Two forms, told apart by the header, which states the units and must be one of `HEADERS`; lines that start with ``#``
are comments.

- ``q, V``: an isotropic interaction; q ascending, from at most 0.25 to at least 10 in steps of at most 0.5.
- ``q_x, q_y, V``: a rectangular grid, rows in any order, at equal steps of at most 0.25 in either direction, that
  holds -q with every q and reaches 8 at least. V at the origin is not used and may be ``inf`` or ``nan``.

Either must be smooth: no value of q V may depart by more than 1 % of the largest from the cubic through its four
neighbours. And it must resolve V at small q: the polynomials through the first four and five points have to agree on
q V at q = 0 within 1 % of the largest.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from itertools import pairwise

from mcgeo.errors import McgeoError

HEADERS = ("q [1/l_B], V [e^2 l_B/(4 pi eps)]", "q_x [1/l_B], q_y [1/l_B], V [e^2 l_B/(4 pi eps)]")

_LEAST_ROWS = 8
_LARGEST_FIRST, _LEAST_LAST, _LARGEST_STEP = 0.25, 10.0, 0.5
_LARGEST_GRID_STEP, _LEAST_GRID_END = 0.25, 8.0
_ROUGHNESS = 0.01
# So many steps from the origin of a grid the jump or edge of |q| V there is felt no more.
_EDGE_STEPS = 10.0
_SYMMETRY = 1e-6
_ROUNDING = 1e-6

Row = tuple[float, ...]


class TableError(McgeoError):
    """What is wrong with a table, with its line, and what is allowed."""


@dataclass(frozen=True)
class Table:
    """A table that passed all checks.

    Attributes
    ----------
    axes : tuple of tuple of float
        (q,) of an isotropic interaction, (q_x, q_y) of a grid; ascending.
    values : tuple of tuple of float
        V in one row, or in one row per q_x; 0 at the origin of a grid.
    """

    axes: tuple[Row, ...]
    values: tuple[Row, ...]


def parse_table(text: str) -> Table:
    """The table of a comma-separated text.

    Raises
    ------
    TableError
        If header, numbers, range, steps, symmetry or smoothness are not as the module says.
    """
    lines = [(n, line.strip()) for n, line in enumerate(text.splitlines(), 1)]
    lines = [(n, line) for n, line in lines if line and not line.startswith("#")]
    if not lines:
        raise TableError("the table is empty")
    number, header = lines[0]
    known = [_squeezed(form) for form in HEADERS]
    if _squeezed(header) not in known:
        forms = "' or '".join(HEADERS)
        raise TableError(f"line {number}: the header must be '{forms}', to state the units, not '{header[:60]}'")
    n_columns = 2 + known.index(_squeezed(header))
    rows = [(n, _numbers(n, line, n_columns)) for n, line in lines[1:]]
    return _isotropic(rows) if n_columns == 2 else _grid(rows)


def _squeezed(text: str) -> str:
    return re.sub(r"[\s\"\ufeff]", "", text)


def _numbers(number: int, line: str, n_columns: int) -> Row:
    try:
        row = tuple(float(cell) for cell in line.split(","))
    except ValueError:
        row = ()
    at_origin = n_columns == 3 and row[:2] == (0.0, 0.0)
    finite = all(math.isfinite(value) for value in (row[:2] if at_origin else row))
    if len(row) != n_columns or not finite:
        raise TableError(f"line {number}: must hold {n_columns} finite numbers, not '{line[:60]}'")
    return row


def _isotropic(rows: list[tuple[int, Row]]) -> Table:
    if len(rows) < _LEAST_ROWS:
        raise TableError(f"a table of V(q) needs {_LEAST_ROWS} rows at least, not {len(rows)}")
    q = [row[0] for _, row in rows]
    for (_, (before, _)), (number, (after, _)) in pairwise(rows):
        if after <= before:
            raise TableError(f"line {number}: q must ascend, but {after:g} follows {before:g}")
        if after - before > _LARGEST_STEP:
            raise TableError(
                f"line {number}: a step of q must be at most {_LARGEST_STEP:g}, but {after:g} follows {before:g}"
            )
    if not 0.0 < q[0] <= _LARGEST_FIRST:
        raise TableError(f"line {rows[0][0]}: the first q must be above 0 and at most {_LARGEST_FIRST:g}, not {q[0]:g}")
    if q[-1] < _LEAST_LAST:
        raise TableError(f"line {rows[-1][0]}: the last q must be at least {_LEAST_LAST:g}, not {q[-1]:g}")
    reduced = [k * v for _, (k, v) in rows]
    excess = _roughness(q, reduced)
    worst = max(range(len(q)), key=excess.__getitem__)
    if excess[worst] > _ROUGHNESS * max(map(abs, reduced)):
        raise TableError(f"line {rows[worst][0]}: V is not smooth here: it departs from the rows around it; correct it")
    _check_small_q(q, reduced, max(map(abs, reduced)))
    return Table((tuple(q),), (tuple(row[1] for _, row in rows),))


def _check_small_q(lengths: list[float], reduced: list[float], scale: float) -> None:
    four, five = (_value_at(0.0, lengths[:n], reduced[:n]) for n in (4, 5))
    if abs(five - four) > _ROUGHNESS * scale:
        raise TableError("V changes too much between the points of smallest q to be continued to q = 0; add smaller q")


def _value_at(x: float, nodes: list[float], values: list[float]) -> float:
    """Polynomial through the nodes, at x."""
    total = 0.0
    for j, value in enumerate(values):
        weight = 1.0
        for k, node in enumerate(nodes):
            if k != j:
                weight *= (x - node) / (nodes[j] - node)
        total += weight * value
    return total


def _roughness(x: list[float], y: list[float]) -> list[float]:
    """Distance of each value from the cubic through its two neighbours on either side; 0 at the ends."""
    found = [0.0] * len(x)
    for i in range(2, len(x) - 2):
        others = (i - 2, i - 1, i + 1, i + 2)
        found[i] = abs(y[i] - _value_at(x[i], [x[j] for j in others], [y[j] for j in others]))
    return found


def _grid(rows: list[tuple[int, Row]]) -> Table:
    x, y = (_axis(sorted({row[axis] for _, row in rows}), "q_x" if axis == 0 else "q_y") for axis in (0, 1))
    place = {(qx, qy): (n, v) for n, (qx, qy, v) in rows}
    if len(place) != len(rows) or len(rows) != len(x) * len(y) - ((0.0, 0.0) not in place):
        raise TableError(
            f"must hold every point of a grid of {len(x)} values of q_x and {len(y)} of q_y once, "
            f"{len(x) * len(y)} in all, not {len(rows)} rows"
        )
    place[0.0, 0.0] = (0, 0.0)
    reduced = [[math.hypot(qx, qy) * place[qx, qy][1] for qy in y] for qx in x]
    scale = max(abs(value) for row in reduced for value in row)
    for i, row in enumerate(reduced):
        for j, value in enumerate(row):
            if abs(value - reduced[-1 - i][-1 - j]) > _SYMMETRY * scale:
                raise TableError(f"line {place[x[i], y[j]][0]}: V(-q) must be V(q), as that of any two particles is")
    middle = len(x) // 2, len(y) // 2
    _check_small_q(list(x[middle[0] + 1 :]), [row[middle[1]] for row in reduced[middle[0] + 1 :]], scale)
    _check_small_q(list(y[middle[1] + 1 :]), reduced[middle[0]][middle[1] + 1 :], scale)
    _check_grid_smoothness(x, y, reduced, scale, {point: n for point, (n, _) in place.items()})
    return Table((x, y), tuple(tuple(place[qx, qy][1] for qy in y) for qx in x))


def _axis(values: list[float], name: str) -> Row:
    steps = [after - before for before, after in pairwise(values)]
    if len(values) < 5 or max(steps) > _LARGEST_GRID_STEP or values[-1] < _LEAST_GRID_END:
        raise TableError(
            f"the grid must reach from {-_LEAST_GRID_END:g} to {_LEAST_GRID_END:g} at least, in steps of at most "
            f"{_LARGEST_GRID_STEP:g}, in {name}"
        )
    if max(steps) - min(steps) > _ROUNDING * values[-1] or 0.0 not in values or -values[0] != values[-1]:
        raise TableError(f"the steps of the grid must be equal, and symmetric about 0, in {name}")
    return tuple(values)


def _check_grid_smoothness(
    x: Row, y: Row, reduced: list[list[float]], scale: float, lines: dict[tuple[float, float], int]
) -> None:
    """Along either axis, away from the origin, where |q| V has an edge."""
    for along, across, transposed in ((y, x, False), (x, y, True)):
        for i, fixed in enumerate(across):
            values = [row[i] for row in reduced] if transposed else reduced[i]
            far = _EDGE_STEPS * max(along[-1] - along[-2], across[-1] - across[-2])
            for j, excess in enumerate(_roughness(list(along), values)):
                if excess > _ROUGHNESS * scale and math.hypot(fixed, along[j]) > far:
                    point = (along[j], fixed) if transposed else (fixed, along[j])
                    raise TableError(
                        f"line {lines[point]}: V is not smooth here: it departs from the rows around it; correct it"
                    )
