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


@njit(cache=True, nogil=True)
def _light_sums(
    start, end, normals, areas, middles, samples, rows, starts, low, high, shifts, columns,
    sin_lat, cos_lat, by_latitude, weight, lambert, lever, across, lit_lever, mean_mu,
):  # fmt: skip
    """Add facets start..end to the sums over the surface at every place p.

    lambert (p, 3): sum of dA <mu n>; lever (p, 3): sum of dA <mu r x n>; across (p,): sum of dA <mu>;
    lit_lever (p, 3): sum of dA <mu r> over the lit sample points; all in the frame where the Sun has no y.
    mean_mu (f,): mean of <mu> with the given weights (p,). by_latitude (p,): places in ascending order of sin_lat.
    """
    p_count = sin_lat.shape[0]
    s_count = shifts.shape[0]
    i0 = np.empty(p_count)
    ic = np.empty(p_count)
    i_s = np.empty(p_count)
    ranked = np.empty(p_count)
    for k in range(p_count):
        ranked[k] = sin_lat[by_latitude[k]]
    share = 1.0 / (columns * s_count)
    for f in range(start, end):
        nx, ny, nz = normals[f, 0], normals[f, 1], normals[f, 2]
        nh = math.sqrt(nx * nx + ny * ny)
        cn, sn = (nx / nh, ny / nh) if nh > 0.0 else (1.0, 0.0)
        rx, ry, rz = middles[f, 0], middles[f, 1], middles[f, 2]
        da = areas[f]
        for p in range(p_count):
            m0, m1 = _day(nz * sin_lat[p], nh * cos_lat[p])
            i0[p] = m0
            ic[p] = m1 * cn
            i_s[p] = m1 * sn
            # direct light: all of it here, the blocked part is taken away at its sample point below
            lit_lever[p, 0] += da * (ic[p] * rx + i_s[p] * ry)
            lit_lever[p, 1] += da * (ic[p] * ry - i_s[p] * rx)
            lit_lever[p, 2] += da * m0 * rz
        row = rows[f]
        if row >= 0:
            for s in range(s_count):
                qx, qy, qz = samples[f, s, 0], samples[f, s, 1], samples[f, s, 2]
                for c in range(columns):
                    at = (row * s_count + s) * columns + c
                    if starts[at] == starts[at + 1]:
                        continue
                    angle = 2.0 * math.pi * (c + shifts[s]) / columns
                    cl, sl = math.cos(angle), math.sin(angle)
                    nl = nx * cl + ny * sl
                    for i in range(starts[at], starts[at + 1]):
                        k = np.searchsorted(ranked, low[i])
                        while k < p_count and ranked[k] < high[i]:
                            p = by_latitude[k]
                            k += 1
                            mu = (nz * sin_lat[p] + nl * cos_lat[p]) * share
                            if mu <= 0.0:
                                continue
                            i0[p] -= mu
                            ic[p] -= mu * cl
                            i_s[p] -= mu * sl
                            lit_lever[p, 0] -= da * mu * (cl * qx + sl * qy)
                            lit_lever[p, 1] -= da * mu * (cl * qy - sl * qx)
                            lit_lever[p, 2] -= da * mu * qz
        gx, gy, gz = ry * nz - rz * ny, rz * nx - rx * nz, rx * ny - ry * nx
        mean = 0.0
        for p in range(p_count):
            a0, ac, a_s = da * i0[p], da * ic[p], da * i_s[p]
            lambert[p, 0] += ac * nx + a_s * ny
            lambert[p, 1] += ac * ny - a_s * nx
            lambert[p, 2] += a0 * nz
            lever[p, 0] += ac * gx + a_s * gy
            lever[p, 1] += ac * gy - a_s * gx
            lever[p, 2] += a0 * gz
            across[p] += a0
            mean += weight[p] * i0[p]
        mean_mu[f] = mean


@njit(cache=True, nogil=True)
def _lit(facets, normals, rows, starts, low, high, shifts, columns, sin_lat, cos_lat, out):
    """mu at every place and rotation node for the facets given, out (p, c, l): facet l = facets[l] last.

    Nodes are in the order of time: the Sun's body longitude falls by 2 pi/columns from one to the next.
    """
    s_count = shifts.shape[0]
    for l in range(facets.shape[0]):
        f = facets[l]
        nx, ny, nz = normals[f, 0], normals[f, 1], normals[f, 2]
        row = rows[f]
        for c in range(columns):
            j = (columns - c) % columns
            for p in range(sin_lat.shape[0]):
                out[p, j, l] = 0.0
            for s in range(s_count):
                shift = shifts[s] if row >= 0 else 0.0
                angle = 2.0 * math.pi * (c + shift) / columns
                nl = nx * math.cos(angle) + ny * math.sin(angle)
                at = (row * s_count + s) * columns + c
                for p in range(sin_lat.shape[0]):
                    mu = nz * sin_lat[p] + nl * cos_lat[p]
                    if mu <= 0.0:
                        continue
                    free = True
                    if row >= 0:
                        for i in range(starts[at], starts[at + 1]):
                            if low[i] < sin_lat[p] < high[i]:
                                free = False
                                break
                    if free:
                        out[p, j, l] += mu / s_count


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
