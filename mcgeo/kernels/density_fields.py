"""Smoothed densities of eight walkers on a grid, and the means of products of three of them.

See `mcgeo.kernels.density_controls`. A real field is twice the real part of its sum over the half-plane. Along each
direction the points x, -x, M/2 - x and M/2 + x share their sums over even and over odd waves; sums are written out,
which for some ten waves and forty points is no slower than a fast transform.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from mcgeo.kernels._jit import inlined_kernel, lean_kernel
from mcgeo.kernels.lanes import load, splat, store


@lean_kernel
def _fold(
    density: np.ndarray, change: np.ndarray, weights: np.ndarray, row: int, reach: int, folded: np.ndarray
) -> None:
    """Sums and differences of the filtered waves n2 and -n2 of one row: eight numbers per n2 = 0 .. reach."""
    width = weights.shape[0]
    middle = width // 2
    for k in range(reach + 1):
        plus, minus = 2 * (row * width + middle + k), 2 * (row * width + middle - k)
        w, v = weights[middle + k], weights[middle - k]
        if k == 0:
            v = 0.0
        for part in range(2):
            x, y = load(density, plus + part) * w, load(density, minus + part) * v
            store(folded, 8 * k + part, x + y)
            store(folded, 8 * k + 4 + part, x - y)
            x, y = load(change, plus + part) * w, load(change, minus + part) * v
            store(folded, 8 * k + 2 + part, x + y)
            store(folded, 8 * k + 6 + part, x - y)


@inlined_kernel
def _put_four(columns: np.ndarray, stride: int, place: int, y: int, half: int, even: Any, odd: Any) -> None:
    """One complex number at y, -y, M/2 - y and M/2 + y from (cosine real, imaginary, sine real, imaginary) sums."""
    ecr, eci, esr, esi = even
    ocr, oci, osr, osi = odd
    cr, ci, sr, si = ecr + ocr, eci + oci, esr + osr, esi + osi
    at, mirrored = y * stride + place, (2 * half - y) % (2 * half) * stride + place
    store(columns, at, cr - si)
    store(columns, at + 1, ci + sr)
    store(columns, mirrored, cr + si)
    store(columns, mirrored + 1, ci - sr)
    cr, ci, sr, si = ecr - ocr, eci - oci, osr - esr, osi - esi
    at, mirrored = (half - y) * stride + place, (half + y) % (2 * half) * stride + place
    store(columns, at, cr - si)
    store(columns, at + 1, ci + sr)
    store(columns, mirrored, cr + si)
    store(columns, mirrored + 1, ci - sr)


@lean_kernel
def _spread_row(
    second: np.ndarray, reach: int, folded: np.ndarray, stride: int, place: int, columns: np.ndarray
) -> None:
    """One row of waves to all grid points along L2, for a density and its change together."""
    quarter = second.shape[1]
    half = 2 * (quarter - 1)
    for y in range(quarter):
        ea, eb, ec, ed = load(folded, 0), load(folded, 1), load(folded, 2), load(folded, 3)
        oa, ob, oc, od = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        es, et, eu, ev = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        os, ot, ou, ov = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        for k in range(1, reach + 1, 2):
            c, s = splat(second[0, y, k]), splat(second[1, y, k])
            oa, ob = oa + load(folded, 8 * k) * c, ob + load(folded, 8 * k + 1) * c
            oc, od = oc + load(folded, 8 * k + 2) * c, od + load(folded, 8 * k + 3) * c
            os, ot = os + load(folded, 8 * k + 4) * s, ot + load(folded, 8 * k + 5) * s
            ou, ov = ou + load(folded, 8 * k + 6) * s, ov + load(folded, 8 * k + 7) * s
        for k in range(2, reach + 1, 2):
            c, s = splat(second[0, y, k]), splat(second[1, y, k])
            ea, eb = ea + load(folded, 8 * k) * c, eb + load(folded, 8 * k + 1) * c
            ec, ed = ec + load(folded, 8 * k + 2) * c, ed + load(folded, 8 * k + 3) * c
            es, et = es + load(folded, 8 * k + 4) * s, et + load(folded, 8 * k + 5) * s
            eu, ev = eu + load(folded, 8 * k + 6) * s, ev + load(folded, 8 * k + 7) * s
        _put_four(columns, stride, place, y, half, (ea, eb, es, et), (oa, ob, os, ot))
        _put_four(columns, stride, place + 2, y, half, (ec, ed, eu, ev), (oc, od, ou, ov))


@inlined_kernel
def _put_four_real(lines: np.ndarray, place: int, x: int, half: int, even: Any, odd: Any) -> None:
    """One real number at x, -x, M/2 - x and M/2 + x from (cosine, sine) sums."""
    ec, es = even
    oc, os = odd
    c, s = ec + oc, es + os
    store(lines, place + 2 * x, (c - s) * 2.0)
    store(lines, place + 2 * ((2 * half - x) % (2 * half)), (c + s) * 2.0)
    c, s = ec - oc, os - es
    store(lines, place + 2 * (half - x), (c - s) * 2.0)
    store(lines, place + 2 * ((half + x) % (2 * half)), (c + s) * 2.0)


@lean_kernel
def _spread_line(first: np.ndarray, columns: np.ndarray, start: int, lines: np.ndarray, place: int) -> None:
    """All rows to all points along L1 at one point of L2, two at a time, for a density and its change together."""
    quarter, n_rows = first.shape[1], first.shape[2]
    half = 2 * (quarter - 1)
    for x in range(0, quarter, 2):
        z = min(x + 1, quarter - 1)
        ea, es, oa, os = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        eb, et, ob, ot = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        ec, eu, oc, ou = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        ed, ev, od, ov = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        for row in range(0, n_rows, 2):
            at = start + 4 * row
            na, ns, nb, nt = load(columns, at), load(columns, at + 1), load(columns, at + 2), load(columns, at + 3)
            c, s = splat(first[0, x, row]), splat(first[1, x, row])
            ea, es, eb, et = ea + na * c, es + ns * s, eb + nb * c, et + nt * s
            c, s = splat(first[0, z, row]), splat(first[1, z, row])
            ec, eu, ed, ev = ec + na * c, eu + ns * s, ed + nb * c, ev + nt * s
        for row in range(1, n_rows, 2):
            at = start + 4 * row
            na, ns, nb, nt = load(columns, at), load(columns, at + 1), load(columns, at + 2), load(columns, at + 3)
            c, s = splat(first[0, x, row]), splat(first[1, x, row])
            oa, os, ob, ot = oa + na * c, os + ns * s, ob + nb * c, ot + nt * s
            c, s = splat(first[0, z, row]), splat(first[1, z, row])
            oc, ou, od, ov = oc + na * c, ou + ns * s, od + nb * c, ov + nt * s
        _put_four_real(lines, place, x, half, (ea, es), (oa, os))
        _put_four_real(lines, place + 1, x, half, (eb, et), (ob, ot))
        _put_four_real(lines, place, z, half, (ec, eu), (oc, ou))
        _put_four_real(lines, place + 1, z, half, (ed, ev), (od, ov))


@lean_kernel
def _add_line(lines: np.ndarray, n_points: int, triples: np.ndarray) -> None:
    """Add the products of three densities, changed in each of their factors, along one line of the grid.

    With three densities n, m, k: nnn, nnm, nnk, nmm, nmk, nkk, mmm, mmk, mkk, kkk.
    """
    t0, t1, t2, t3, t4 = load(triples, 0), load(triples, 1), load(triples, 2), load(triples, 3), load(triples, 4)
    t5, t6, t7, t8, t9 = load(triples, 5), load(triples, 6), load(triples, 7), load(triples, 8), load(triples, 9)
    for x in range(n_points):
        n, dn = load(lines, 2 * x), load(lines, 2 * x + 1)
        m, dm = load(lines, 2 * (n_points + x)), load(lines, 2 * (n_points + x) + 1)
        k, dk = load(lines, 2 * (2 * n_points + x)), load(lines, 2 * (2 * n_points + x) + 1)
        nn, mm, kk = n * n, m * m, k * k
        nm, nk, mk = n * m * 2.0, n * k * 2.0, m * k * 2.0
        t0 = t0 + nn * dn * 3.0
        t1 = t1 + nm * dn + nn * dm
        t2 = t2 + nk * dn + nn * dk
        t3 = t3 + mm * dn + nm * dm
        t4 = t4 + (mk * dn + nk * dm + nm * dk) * 0.5
        t5 = t5 + kk * dn + nk * dk
        t6 = t6 + mm * dm * 3.0
        t7 = t7 + mk * dm + mm * dk
        t8 = t8 + kk * dm + mk * dk
        t9 = t9 + kk * dk * 3.0
    for row, value in enumerate((t0, t1, t2, t3, t4, t5, t6, t7, t8, t9)):
        store(triples, row, value)


@lean_kernel
def add_triple_means(tables: Any, scratch: Any) -> None:
    """Means over the cell of l_a n_b n_c + n_a l_b n_c + n_a n_b l_c of all triples into ``scratch.triples``."""
    n_filters, n_rows, _ = tables.filters.shape
    points_1, points_2 = 4 * (tables.first.shape[1] - 1), 4 * (tables.second.shape[1] - 1)
    stride = 4 * n_filters * n_rows
    for f in range(n_filters):
        for row in range(n_rows):
            reach = tables.reach[row]
            _fold(scratch.density, scratch.change, tables.filters[f, row], row, reach, scratch.folded)
            _spread_row(tables.second, reach, scratch.folded, stride, 4 * (f * n_rows + row), scratch.columns)
    for t in range(scratch.triples.shape[0]):
        store(scratch.triples, t, splat(0.0))
    for y in range(points_2):
        for f in range(n_filters):
            start = y * stride + 4 * f * n_rows
            _spread_line(tables.first, scratch.columns, start, scratch.lines, 2 * f * points_1)
        _add_line(scratch.lines, points_1, scratch.triples)
    scale = 1.0 / (points_1 * points_2)
    for t in range(scratch.triples.shape[0]):
        store(scratch.triples, t, load(scratch.triples, t) * scale)
