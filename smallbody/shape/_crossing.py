"""Kernel that looks for facets that cut through each other."""

# mypy: allow-untyped-defs

from __future__ import annotations

from numba import njit

TOUCH = 1e-6  # cuts nearer to the rim of a facet or the end of an edge than this part of it count as touching


@njit(cache=True, nogil=True)
def crossing_facets(p, f, low, high, order, budget, out):  # p (v, 3), f (t, 3), low, high (t, 3) boxes, out (t,) bool
    # plainly: for all pairs of facets whose boxes overlap, does an edge of one pass through the other?
    # order (t,) is by low[:, 0]; gives up after so many pairs of boxes, and then returns False
    for at in range(order.shape[0]):
        i = order[at]
        for next_at in range(at + 1, order.shape[0]):
            j = order[next_at]
            if low[j, 0] > high[i, 0]:
                break
            budget -= 1
            if low[j, 1] > high[i, 1] or high[j, 1] < low[i, 1] or low[j, 2] > high[i, 2] or high[j, 2] < low[i, 2]:
                continue
            if not (out[i] and out[j]) and (_edge_cuts(p, f, i, j) or _edge_cuts(p, f, j, i)):
                out[i] = True
                out[j] = True
        if budget < 0:
            return False
    return True


@njit(cache=True, nogil=True)
def _edge_cuts(p, f, i, j):
    # does an edge of facet i pass through facet j, none of whose corners it has? (Moeller & Trumbore 1997, J. Graphics
    # Tools 2, 21)
    n_shared = 0
    for k in range(3):
        for m in range(3):
            if f[i, k] == f[j, m]:
                n_shared += 1
    if n_shared >= 2:
        return False
    a, b, c = f[j, 0], f[j, 1], f[j, 2]
    u0, u1, u2 = p[b, 0] - p[a, 0], p[b, 1] - p[a, 1], p[b, 2] - p[a, 2]
    w0, w1, w2 = p[c, 0] - p[a, 0], p[c, 1] - p[a, 1], p[c, 2] - p[a, 2]
    for k in range(3):
        s, e = f[i, k], f[i, (k + 1) % 3]
        if s in (a, b, c) or e in (a, b, c):
            continue
        d0, d1, d2 = p[e, 0] - p[s, 0], p[e, 1] - p[s, 1], p[e, 2] - p[s, 2]
        h0, h1, h2 = d1 * w2 - d2 * w1, d2 * w0 - d0 * w2, d0 * w1 - d1 * w0
        det = u0 * h0 + u1 * h1 + u2 * h2
        if det == 0.0:
            continue
        t0, t1, t2 = p[s, 0] - p[a, 0], p[s, 1] - p[a, 1], p[s, 2] - p[a, 2]
        beta = (t0 * h0 + t1 * h1 + t2 * h2) / det
        if not TOUCH < beta < 1.0 - TOUCH:
            continue
        q0, q1, q2 = t1 * u2 - t2 * u1, t2 * u0 - t0 * u2, t0 * u1 - t1 * u0
        gamma = (d0 * q0 + d1 * q1 + d2 * q2) / det
        if gamma <= TOUCH or beta + gamma >= 1.0 - TOUCH:
            continue
        along = (w0 * q0 + w1 * q1 + w2 * q2) / det
        if TOUCH < along < 1.0 - TOUCH:
            return True
    return False
