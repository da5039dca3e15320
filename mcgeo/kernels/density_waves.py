"""Density waves of eight walkers and their change under the generator L: rho_q and lambda_q = -q^2 rho_q - i D_q.

See `mcgeo.kernels.density_controls`. In units of the cell q.r = 2 pi (n1 a + n2 b) and q.F = n1 G1.F + n2 G2.F.
Products of cosines and sines of the two parts of the phase are summed once and serve +n2 and -n2 together; the sums
with weights 1, G1.F and G2.F share their loads.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from mcgeo.kernels._jit import inlined_kernel, lean_kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns
from mcgeo.kernels.lanes import load, splat, store


@lean_kernel
def _start(tables: Any, a: np.ndarray, b: np.ndarray, forces: np.ndarray, scratch: Any) -> None:
    """Powers of exp(2 pi i b); of each electron the row n1 = 0 with its weights, and the step exp(2 pi i a)."""
    n = a.shape[0]
    g = tables.reciprocal
    powers, rows, strengths = scratch.powers, scratch.rows, scratch.strengths
    for j in range(n):
        c, s = cosine_sine_of_turns(load(b, j))
        store(powers, 2 * j, splat(1.0))
        store(powers, 2 * j + 1, splat(0.0))
        store(powers, 2 * (n + j), c)
        store(powers, 2 * (n + j) + 1, s)
        fx, fy = load(forces, 2 * j), load(forces, 2 * j + 1)
        first, second = fx * g[0, 0] + fy * g[0, 1], fx * g[1, 0] + fy * g[1, 1]
        store(strengths, 2 * j, first)
        store(strengths, 2 * j + 1, second)
        c, s = cosine_sine_of_turns(load(a, j))
        store(rows, 8 * j, splat(1.0))
        store(rows, 8 * j + 1, splat(0.0))
        store(rows, 8 * j + 2, first)
        store(rows, 8 * j + 3, splat(0.0))
        store(rows, 8 * j + 4, second)
        store(rows, 8 * j + 5, splat(0.0))
        store(rows, 8 * j + 6, c)
        store(rows, 8 * j + 7, s)
    for k in range(2, powers.shape[0] // (2 * n)):
        for j in range(n):
            c, s = load(powers, 2 * ((k - 1) * n + j)), load(powers, 2 * ((k - 1) * n + j) + 1)
            x, y = load(powers, 2 * (n + j)), load(powers, 2 * (n + j) + 1)
            store(powers, 2 * (k * n + j), c * x - s * y)
            store(powers, 2 * (k * n + j) + 1, c * y + s * x)


@lean_kernel
def _next_row(n: int, scratch: Any) -> None:
    rows, strengths = scratch.rows, scratch.strengths
    for j in range(n):
        c, s, x, y = load(rows, 8 * j), load(rows, 8 * j + 1), load(rows, 8 * j + 6), load(rows, 8 * j + 7)
        c, s = c * x - s * y, c * y + s * x
        first, second = load(strengths, 2 * j), load(strengths, 2 * j + 1)
        store(rows, 8 * j, c)
        store(rows, 8 * j + 1, s)
        store(rows, 8 * j + 2, c * first)
        store(rows, 8 * j + 3, s * first)
        store(rows, 8 * j + 4, c * second)
        store(rows, 8 * j + 5, s * second)


@inlined_kernel
def _put_wave(tables: Any, scratch: Any, n1: int, n2: int, width: int, rho: Any, first: Any, second: Any) -> None:
    """Store rho_q and lambda_q from the sums with weights 1, G1.F and G2.F."""
    column = width // 2 + n2
    norm_sq = tables.norm_sq[n1, column]
    place = 2 * (n1 * width + column)
    real, imag = rho
    # -i (dr + i di) = di - i dr
    dr, di = first[0] * (1.0 * n1) + second[0] * (1.0 * n2), first[1] * (1.0 * n1) + second[1] * (1.0 * n2)
    store(scratch.density, place, real)
    store(scratch.density, place + 1, imag)
    store(scratch.change, place, di - real * norm_sq)
    store(scratch.change, place + 1, splat(0.0) - dr - imag * norm_sq)


@inlined_kernel
def _put_both(
    tables: Any, scratch: Any, n1: int, k: int, ones: Any, first: Any, second: Any
) -> None:
    """The waves n2 = k and -k from the sums of cosine and sine products cc, ss, cs, sc with each weight."""
    if k > tables.reach[n1]:
        return
    width = tables.norm_sq.shape[1]
    cx, sy, cy, sx = ones
    fcx, fsy, fcy, fsx = first
    gcx, gsy, gcy, gsx = second
    _put_wave(
        tables, scratch, n1, k, width,
        (cx - sy, (sx + cy) * (-1.0)), (fcx - fsy, (fsx + fcy) * (-1.0)), (gcx - gsy, (gsx + gcy) * (-1.0)),
    )  # fmt: skip
    _put_wave(
        tables, scratch, n1, -k, width,
        (cx + sy, cy - sx), (fcx + fsy, fcy - fsx), (gcx + gsy, gcy - gsx),
    )  # fmt: skip


@lean_kernel
def fill_waves(tables: Any, a: np.ndarray, b: np.ndarray, forces: np.ndarray, scratch: Any) -> None:
    """rho_q into ``scratch.density`` and lambda_q into ``scratch.change``, rows 2 (n1 width + n2) and the next.

    Two values of n2 at once: twenty-four sums stay in registers while ten numbers per electron are loaded.
    """
    n = a.shape[0]
    rows, powers = scratch.rows, scratch.powers
    _start(tables, a, b, forces, scratch)
    for n1 in range(tables.norm_sq.shape[0]):
        if n1 > 0:
            _next_row(n, scratch)
        for k in range(0, tables.reach[n1] + 1, 2):
            cx, sy, cy, sx = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            fcx, fsy, fcy, fsx = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            gcx, gsy, gcy, gsx = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            cu, sv, cv, su = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            fcu, fsv, fcv, fsu = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            gcu, gsv, gcv, gsu = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            for j in range(n):
                x, y = load(powers, 2 * (k * n + j)), load(powers, 2 * (k * n + j) + 1)
                u, v = load(powers, 2 * ((k + 1) * n + j)), load(powers, 2 * ((k + 1) * n + j) + 1)
                c, s = load(rows, 8 * j), load(rows, 8 * j + 1)
                cx, sy, cy, sx = cx + c * x, sy + s * y, cy + c * y, sx + s * x
                cu, sv, cv, su = cu + c * u, sv + s * v, cv + c * v, su + s * u
                c, s = load(rows, 8 * j + 2), load(rows, 8 * j + 3)
                fcx, fsy, fcy, fsx = fcx + c * x, fsy + s * y, fcy + c * y, fsx + s * x
                fcu, fsv, fcv, fsu = fcu + c * u, fsv + s * v, fcv + c * v, fsu + s * u
                c, s = load(rows, 8 * j + 4), load(rows, 8 * j + 5)
                gcx, gsy, gcy, gsx = gcx + c * x, gsy + s * y, gcy + c * y, gsx + s * x
                gcu, gsv, gcv, gsu = gcu + c * u, gsv + s * v, gcv + c * v, gsu + s * u
            _put_both(tables, scratch, n1, k, (cx, sy, cy, sx), (fcx, fsy, fcy, fsx), (gcx, gsy, gcy, gsx))
            _put_both(tables, scratch, n1, k + 1, (cu, sv, cv, su), (fcu, fsv, fcv, fsu), (gcu, gsv, gcv, gsu))
