# mypy: ignore-errors
"""Kernels: what light a rotating facet receives, reduced to the few means that force and torque need.

mu is the cosine of the Sun's zenith distance where the facet sees the Sun, else 0; lambda the Sun's body longitude.
Over a rotation only <mu> and <mu exp(i lambda)> are needed (push/recoil.py says why).
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from smallbody.light._horizons import _share_that_sees


@njit(cache=True, nogil=True, inline="always")
def _day(a, b):
    """<mu> and <mu cos H> of mu = max(0, a + b cos H), b >= 0: unobstructed sky, exactly."""
    if b <= abs(a):
        return (a, 0.5 * b) if a > 0.0 else (0.0, 0.0)
    h = math.acos(-a / b)
    s = math.sqrt(1.0 - (a / b) ** 2)
    return (a * h + b * s) / math.pi, (2.0 * a * s + b * (h - s * a / b)) / (2.0 * math.pi)


@njit(cache=True, nogil=True, inline="always")
def _rank(ranked, cells, x):
    """How many of ranked (ascending, in [-1, 1]) are below x; cells (m + 1,): the same at x = -1 + 2 i/m."""
    m = cells.shape[0] - 1
    k = cells[max(0, min(m, math.floor((x + 1.0) * 0.5 * m)))]
    while k < ranked.shape[0] and ranked[k] < x:
        k += 1
    return k


@njit(cache=True, nogil=True)
def _light_sums(
    start, end, normals, areas, middles, samples, rows, starts, low, high, cosine, sine,
    sin_lat, cos_lat, by_latitude, ranked, cells, weight, lambert, lever, across, lit_lever, mean_mu,
):  # fmt: skip
    """Add facets start..end to the sums over the surface at every place p, for three tables of the sky v: all meridians
    and samples, every second meridian, every fourth sample.

    lambert (v, p, 3): sum of dA <mu n>; lever (v, p, 3): sum of dA <mu r x n>; across (v, p): sum of dA <mu>;
    lit_lever (v, p, 3): sum of dA <mu r> over the lit sample points; all in the frame where the Sun has no y.
    mean_mu (f,): mean of <mu> with the given weights (p,). by_latitude (p,): places in ascending order of sin_lat,
    ranked (p,): their sin_lat, cells: see _rank.

    An interval blocks consecutive ranks. mu is linear in sin and cos of the latitude, so it suffices to note at the two
    ends what begins and ceases to be blocked, and to add up once for each facet. Plainly: for each sample, meridian and
    place take mu away from <mu>, mu exp(i lambda) from <mu exp(i lambda)>, mu r from <mu r>, where an interval holds
    sin_lat.
    """
    p_count = sin_lat.shape[0]
    s_count, columns = cosine.shape
    edge = np.zeros((p_count + 1, 4, 12))  # kind of meridian and sample; what begins at a rank
    run = np.empty((4, 12))
    part = np.empty(12)
    lost = np.empty((3, 12))
    share = 1.0 / (columns * s_count)
    few = 4.0 if s_count >= 4 else 1.0
    for f in range(start, end):
        nx, ny, nz = normals[f, 0], normals[f, 1], normals[f, 2]
        nh = math.sqrt(nx * nx + ny * ny)
        cn, sn = (nx / nh, ny / nh) if nh > 0.0 else (1.0, 0.0)
        rx, ry, rz = middles[f, 0], middles[f, 1], middles[f, 2]
        gx, gy, gz = ry * nz - rz * ny, rz * nx - rx * nz, rx * ny - ry * nx
        da = areas[f]
        row = rows[f]
        if row >= 0:
            edge[:] = 0.0
            run[:] = 0.0
            for s in range(s_count):
                qx, qy, qz = samples[f, s, 0], samples[f, s, 1], samples[f, s, 2]
                rare = 2 if (s % 4 == 3 or s_count < 4) else 0
                for c in range(columns):
                    at = (row * s_count + s) * columns + c
                    if starts[at] == starts[at + 1]:
                        continue
                    kind = rare + (1 if c % 2 == 0 else 0)
                    cl, sl = cosine[s, c], sine[s, c]
                    nl = nx * cl + ny * sl
                    part[0], part[2], part[4] = 1.0, cl, sl
                    part[6], part[8], part[10] = cl * qx + sl * qy, cl * qy - sl * qx, qz
                    for k in range(0, 12, 2):
                        part[k + 1] = nl * part[k]
                    for i in range(starts[at], starts[at + 1]):
                        first, last = _rank(ranked, cells, low[i]), _rank(ranked, cells, high[i])
                        if first < last:
                            for k in range(12):
                                edge[first, kind, k] += part[k]
                                edge[last, kind, k] -= part[k]
        mean = 0.0
        for k in range(p_count):
            p = by_latitude[k]
            m0, m1 = _day(nz * sin_lat[p], nh * cos_lat[p])
            if row >= 0:
                for i in range(4):
                    for j in range(12):
                        run[i, j] += edge[k, i, j]
                for j in range(12):
                    lost[0, j] = share * (run[0, j] + run[1, j] + run[2, j] + run[3, j])
                    lost[1, j] = 2.0 * share * (run[1, j] + run[3, j])
                    lost[2, j] = few * share * (run[2, j] + run[3, j])
            vs, vc = nz * sin_lat[p], cos_lat[p]
            for v in range(3):
                i0, ic, i_s = m0, m1 * cn, m1 * sn
                lx, ly, lz = ic * rx + i_s * ry, ic * ry - i_s * rx, m0 * rz
                if row >= 0:
                    i0 -= vs * lost[v, 0] + vc * lost[v, 1]
                    ic -= vs * lost[v, 2] + vc * lost[v, 3]
                    i_s -= vs * lost[v, 4] + vc * lost[v, 5]
                    lx -= vs * lost[v, 6] + vc * lost[v, 7]
                    ly -= vs * lost[v, 8] + vc * lost[v, 9]
                    lz -= vs * lost[v, 10] + vc * lost[v, 11]
                i0, ic, i_s = da * i0, da * ic, da * i_s
                lambert[v, p, 0] += ic * nx + i_s * ny
                lambert[v, p, 1] += ic * ny - i_s * nx
                lambert[v, p, 2] += i0 * nz
                lever[v, p, 0] += ic * gx + i_s * gy
                lever[v, p, 1] += ic * gy - i_s * gx
                lever[v, p, 2] += i0 * gz
                across[v, p] += i0
                lit_lever[v, p, 0] += da * lx
                lit_lever[v, p, 1] += da * ly
                lit_lever[v, p, 2] += da * lz
                if v == 0:
                    mean += weight[p] * i0
        mean_mu[f] = mean / da if da > 0.0 else 0.0


@njit(cache=True, nogil=True)
def _lit(
    facets, normals, rows, starts, low, high, cosine, sine, sin_lat, cos_lat, by_latitude, ranked, cells,
    scratch, out,
):  # fmt: skip
    """mu at every place and rotation node for the facets given, out (p, c, l): facet l = facets[l] last.

    Nodes are in the order of time: the Sun's body longitude falls by 2 pi/columns from one to the next. Where a facet
    has a row in the table of the sky, mu is the mean over its samples, each at its own meridian:
    cosine, sine (s, c) of its longitude. scratch (c, p).
    """
    p_count = sin_lat.shape[0]
    s_count, columns = cosine.shape
    half = math.pi / columns
    smooth, skew = 0.0, 0.0  # means of cos and sin over the samples' meridians about a node
    for s in range(s_count):
        smooth += cosine[s, 0] / s_count
        skew += sine[s, 0] / s_count
    node_cos, node_sin = np.empty(columns), np.empty(columns)
    for c in range(columns):
        node_cos[c], node_sin[c] = math.cos(2.0 * math.pi * c / columns), math.sin(2.0 * math.pi * c / columns)
    for l in range(facets.shape[0]):
        f = facets[l]
        nx, ny, nz = normals[f, 0], normals[f, 1], normals[f, 2]
        nh = math.sqrt(nx * nx + ny * ny)
        row = rows[f]
        for c in range(columns):
            cl, sl = node_cos[c], node_sin[c]
            nl = nx * cl + ny * sl
            for p in range(p_count):
                mu = nz * sin_lat[p] + nl * cos_lat[p]
                if row < 0:
                    scratch[c, p] = max(0.0, mu)
                    continue
                slack = nh * cos_lat[p] * half
                if mu > slack:  # the Sun is up at all of the samples' meridians
                    scratch[c, p] = nz * sin_lat[p] + (smooth * nl + skew * (ny * cl - nx * sl)) * cos_lat[p]
                elif mu < -slack:
                    scratch[c, p] = 0.0
                else:
                    total = 0.0
                    for s in range(s_count):
                        lean = nx * cosine[s, c] + ny * sine[s, c]
                        total += max(0.0, nz * sin_lat[p] + lean * cos_lat[p])
                    scratch[c, p] = total / s_count
        if row >= 0:
            for s in range(s_count):
                for c in range(columns):
                    at = (row * s_count + s) * columns + c
                    if starts[at] == starts[at + 1]:
                        continue
                    nl = nx * cosine[s, c] + ny * sine[s, c]
                    for i in range(starts[at], starts[at + 1]):
                        last = _rank(ranked, cells, high[i])
                        for k in range(_rank(ranked, cells, low[i]), last):
                            p = by_latitude[k]
                            scratch[c, p] -= max(0.0, nz * sin_lat[p] + nl * cos_lat[p]) / s_count
        for p in range(p_count):
            for c in range(columns):
                out[p, (columns - c) % columns, l] = max(0.0, scratch[c, p])


@njit(cache=True, nogil=True)
def _lit_steps(facets, normals, rows, starts, low, high, shifts, columns, sin_lat, cos_lat, turns, out):
    """mu of the facets given at every step of a course, out (n, L): facet l = facets[l]."""
    for k in range(turns.shape[0]):
        angle = 2.0 * math.pi * turns[k]
        ux, uy, uz = cos_lat[k] * math.cos(angle), cos_lat[k] * math.sin(angle), sin_lat[k]
        for l in range(facets.shape[0]):
            f = facets[l]
            mu = normals[f, 0] * ux + normals[f, 1] * uy + normals[f, 2] * uz
            if mu <= 0.0:
                out[k, l] = 0.0
            elif rows[f] < 0:
                out[k, l] = mu
            else:
                out[k, l] = mu * _share_that_sees(uz, turns[k], rows[f], starts, low, high, shifts, columns)
