"""Kernels that even out the triangles of a closed surface: vertices move along it, edges swap."""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

import numpy as np
from numba import njit

BETTER = 1.02  # an edge is swapped only for this gain in quality, so that rounding decides nothing
GOOD = 0.8  # facets better than this are left alone, so that a grid keeps its symmetry on a body that has it


@njit(cache=True, nogil=True)
def spread(p, f, density, step, normal, weight, out):  # p, normal, out (v, 3), f (t, 3), density, weight (v,)
    # plainly: towards the mean of the centroids of the facets around, weighted by area and wanted density, but along
    # the surface only
    out[:] = 0.0
    normal[:] = 0.0
    weight[:] = 0.0
    for t in range(f.shape[0]):
        a, b, c = f[t, 0], f[t, 1], f[t, 2]
        e0, e1, e2 = p[b, 0] - p[a, 0], p[b, 1] - p[a, 1], p[b, 2] - p[a, 2]
        g0, g1, g2 = p[c, 0] - p[a, 0], p[c, 1] - p[a, 1], p[c, 2] - p[a, 2]
        n0, n1, n2 = e1 * g2 - e2 * g1, e2 * g0 - e0 * g2, e0 * g1 - e1 * g0
        area = math.sqrt(n0 * n0 + n1 * n1 + n2 * n2) * (density[a] + density[b] + density[c])
        m0 = area * (p[a, 0] + p[b, 0] + p[c, 0]) / 3.0
        m1 = area * (p[a, 1] + p[b, 1] + p[c, 1]) / 3.0
        m2 = area * (p[a, 2] + p[b, 2] + p[c, 2]) / 3.0
        for k in range(3):
            v = f[t, k]
            out[v, 0] += m0
            out[v, 1] += m1
            out[v, 2] += m2
            normal[v, 0] += n0
            normal[v, 1] += n1
            normal[v, 2] += n2
            weight[v] += area
    for v in range(p.shape[0]):
        d0 = out[v, 0] / weight[v] - p[v, 0]
        d1 = out[v, 1] / weight[v] - p[v, 1]
        d2 = out[v, 2] / weight[v] - p[v, 2]
        n0, n1, n2 = normal[v, 0], normal[v, 1], normal[v, 2]
        along = (d0 * n0 + d1 * n1 + d2 * n2) / (n0 * n0 + n1 * n1 + n2 * n2)
        out[v, 0] = p[v, 0] + step * (d0 - along * n0)
        out[v, 1] = p[v, 1] + step * (d1 - along * n1)
        out[v, 2] = p[v, 2] + step * (d2 - along * n2)


@njit(cache=True, nogil=True)
def hold_back(old, new, f):  # (v, 3) before and after, f (t, 3)
    # vertices of facets that turned over, seen from the origin, go back, until no facet is turned over
    for _ in range(100):
        n_bad = 0
        for t in range(f.shape[0]):
            if _triple(new, f[t, 0], f[t, 1], f[t, 2]) <= 0.0:
                n_bad += 1
                for k in range(3):
                    for x in range(3):
                        new[f[t, k], x] = old[f[t, k], x]
        if n_bad == 0:
            return
    new[:] = old


@njit(cache=True, nogil=True)
def _triple(p, a, b, c):
    return (
        p[a, 0] * (p[b, 1] * p[c, 2] - p[b, 2] * p[c, 1])
        + p[a, 1] * (p[b, 2] * p[c, 0] - p[b, 0] * p[c, 2])
        + p[a, 2] * (p[b, 0] * p[c, 1] - p[b, 1] * p[c, 0])
    )


@njit(cache=True, nogil=True)
def quality(p, a, b, c):
    # 4 sqrt(3) area over the sum of squared sides: 1 for the equilateral triangle, 0 for a sliver
    e0, e1, e2 = p[b, 0] - p[a, 0], p[b, 1] - p[a, 1], p[b, 2] - p[a, 2]
    g0, g1, g2 = p[c, 0] - p[a, 0], p[c, 1] - p[a, 1], p[c, 2] - p[a, 2]
    h0, h1, h2 = g0 - e0, g1 - e1, g2 - e2
    n0, n1, n2 = e1 * g2 - e2 * g1, e2 * g0 - e0 * g2, e0 * g1 - e1 * g0
    sides = e0 * e0 + e1 * e1 + e2 * e2 + g0 * g0 + g1 * g1 + g2 * g2 + h0 * h0 + h1 * h1 + h2 * h2
    return 2.0 * math.sqrt(3.0) * math.sqrt(n0 * n0 + n1 * n1 + n2 * n2) / sides


@njit(cache=True, nogil=True)
def neighbours(
    f, edge_facet, out
):  # f (t, 3), edge_facet: directed edge (a * v + b) sorted keys and facets, out (t, 3)
    keys, facets, v = edge_facet
    for t in range(f.shape[0]):
        for k in range(3):
            key = f[t, (k + 1) % 3] * v + f[t, k]
            out[t, k] = facets[np.searchsorted(keys, key)]


@njit(cache=True, nogil=True)
def swap_edges(
    p, f, nb, degree, crease, regular
):  # f (t, 3) and nb (t, 3), facets across edge k to k + 1, change in place
    # plainly: where the other diagonal of two neighbouring facets gives a better worse one, take it; crease (v,) is the
    # number of the crease that a vertex lies on, 0 for none: edges along creases stay, and come where they can
    n_swapped = 0
    for t in range(f.shape[0]):
        for k in range(3):
            o = nb[t, k]
            a, b, c = f[t, k], f[t, (k + 1) % 3], f[t, (k + 2) % 3]
            if degree[a] <= 4 or degree[b] <= 4 or (crease[a] > 0 and crease[a] == crease[b]):
                continue
            j = 0
            while f[o, j] != b or f[o, (j + 1) % 3] != a:
                j += 1
            d = f[o, (j + 2) % 3]
            now = min(quality(p, a, b, c), quality(p, b, a, d))
            then = min(quality(p, c, a, d), quality(p, d, b, c))
            if crease[c] > 0 and crease[c] == crease[d]:
                if then <= 0.3:
                    continue
            elif now > GOOD or then <= BETTER * now:  # or, for the sake of six edges at every vertex, not much worse
                gain = degree[a] + degree[b] - degree[c] - degree[d]  # squared deviations from six fall by 2 (gain - 2)
                if not regular or gain <= 2 or then <= 0.7 * now or then <= 0.6:
                    continue
            if _triple(p, c, a, d) <= 0.0 or _triple(p, d, b, c) <= 0.0:
                continue
            fold = _fold(p, a, b, c, d)
            if (fold <= 0.5 and fold <= _fold(p, c, d, b, a)) or _are_joined(f, nb, t, (k + 2) % 3, d):
                continue
            t_ca, t_bc = nb[t, (k + 2) % 3], nb[t, (k + 1) % 3]
            o_ad, o_db = nb[o, (j + 1) % 3], nb[o, (j + 2) % 3]
            f[t, 0], f[t, 1], f[t, 2] = c, a, d
            f[o, 0], f[o, 1], f[o, 2] = d, b, c
            nb[t, 0], nb[t, 1], nb[t, 2] = t_ca, o_ad, o
            nb[o, 0], nb[o, 1], nb[o, 2] = o_db, t_bc, t
            for x in range(3):
                if nb[o_ad, x] == o and f[o_ad, x] == d:
                    nb[o_ad, x] = t
                if nb[t_bc, x] == t and f[t_bc, x] == c:
                    nb[t_bc, x] = o
            degree[a] -= 1
            degree[b] -= 1
            degree[c] += 1
            degree[d] += 1
            n_swapped += 1
            break
    return n_swapped


@njit(cache=True, nogil=True)
def _fold(p, a, b, c, d):
    # cosine of the angle between the two facets that a swap would make, (c, a, d) and (d, b, c)
    n = np.empty((2, 3))
    for i in range(2):
        u, v, w = (c, a, d) if i == 0 else (d, b, c)
        e0, e1, e2 = p[v, 0] - p[u, 0], p[v, 1] - p[u, 1], p[v, 2] - p[u, 2]
        g0, g1, g2 = p[w, 0] - p[u, 0], p[w, 1] - p[u, 1], p[w, 2] - p[u, 2]
        n[i, 0], n[i, 1], n[i, 2] = e1 * g2 - e2 * g1, e2 * g0 - e0 * g2, e0 * g1 - e1 * g0
    dot = n[0, 0] * n[1, 0] + n[0, 1] * n[1, 1] + n[0, 2] * n[1, 2]
    size = math.sqrt(n[0, 0] ** 2 + n[0, 1] ** 2 + n[0, 2] ** 2) * math.sqrt(n[1, 0] ** 2 + n[1, 1] ** 2 + n[1, 2] ** 2)
    return dot / size


@njit(cache=True, nogil=True)
def _are_joined(f, nb, t, corner, d):
    # is there an edge between this corner of t and vertex d already?
    c = f[t, corner]
    at, k = t, corner
    while True:
        if f[at, (k + 1) % 3] == d:
            return True
        at = nb[at, (k + 2) % 3]  # across the edge that ends in c
        k = 0
        while f[at, k] != c:
            k += 1
        if at == t:
            return False
