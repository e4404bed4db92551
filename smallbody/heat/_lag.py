# mypy: ignore-errors
"""Kernels of the periodic lag solver: surface temperatures of a block of facets, in lockstep.

At every place p and rotation node j, per facet (the last axis, LANES of them, one vector: see `_lanes`):

    eps sigma T[p,j]^4 + sum_k w[p,k] T[p,j-k] + sum_q b[p,q] <T>[q] = absorbed[p,j]

w is the conduction operator over a rotation, b the one over the orbit that acts on the daily means; rows of both add
up to nothing. Plain arrays in SI, nothing raised.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from smallbody.heat._lanes import FAST, LANES, any_above, larger, largest, load, root, size, smaller, spread, store

FAR_K = 20.0  # a sweep that moved a node by more than this is followed by one that trusts no guess
FIRST_STEPS = 12  # most Newton rounds for the daily means of a ground at one temperature all day
MEAN_STEPS = 6  # the same for the daily means after each round of sweeps
TINY = 1e-300  # keeps 0/0 out where ground without inertia meets darkness

# A block's moments at a place, (5, L): means over the nodes of T, T^2, T^3, T^4, and the largest step of the last sweep
_M1, _M2, _M3, _M4, _MOVED = 0, 1, 2, 3, 4


@njit(nogil=True, fastmath=FAST, inline="always")
def _newton(x, c, es, w0):
    """One step for es x^4 + w0 x = c. From any x > 0 it lands at or above the root, since the quartic is convex."""
    x3 = es * (x * x * x)
    return (3.0 * (x3 * x) + c) / (4.0 * x3 + w0)


@njit(nogil=True, fastmath=FAST, inline="always")
def _solve_node(c, es, w0):
    """The root without a guess: from two bounds above it, at most 1.19 times too high, Newton's steps come down."""
    x = smaller(root(root(c / es)), c / w0)
    return _newton(_newton(_newton(x, c, es, w0), c, es, w0), c, es, w0)


@njit(cache=True, nogil=True, fastmath=FAST)
def _sweep(fresh, t, absorbed, weights, es, sink, moments):
    """One Gauss-Seidel pass through the nodes in the order of time; moments (5, L) out.

    weights (2 n,): w[n-1], ..., w[0] twice over, so that each node's sum runs over consecutive memory.
    Plainly, for each node j: one Newton step (three if `fresh`) towards
    es T[j]^4 + w[0] T[j] = absorbed[j] - sink - sum_{k>0} w[k] T[j-k].
    Four nodes share each load of T: their sums begin with what the nodes were, and each new value is made good in the
    sums of those after it.
    """
    nodes = t.shape[0]
    w0, w1, w2, w3 = weights[nodes - 1], weights[nodes - 2], weights[nodes - 3], weights[nodes - 4]
    zero = spread(0.0)
    s1, s2, s3, s4, moved = zero, zero, zero, zero, zero
    for j in range(0, nodes, 4):
        base = nodes - 1 - j  # weights[base + i - k] belongs to T[i] in the sum of node j + k
        few = min(4, nodes - j)
        a0 = load(absorbed, j) - sink
        a1 = load(absorbed, j + min(1, few - 1)) - sink
        a2 = load(absorbed, j + min(2, few - 1)) - sink
        a3 = load(absorbed, j + few - 1) - sink
        if few == 4:
            for i in range(nodes):
                x = load(t, i)
                a0 = a0 - weights[base + i] * x
                a1 = a1 - weights[base + i - 1] * x
                a2 = a2 - weights[base + i - 2] * x
                a3 = a3 - weights[base + i - 3] * x
        else:  # at most three are left; sums of nodes that are not there are not used
            for i in range(nodes):
                x = load(t, i)
                a0 = a0 - weights[base + i] * x
                a1 = a1 - weights[base + i - 1] * x
                a2 = a2 - weights[base + i - 2] * x
        for k in range(few):
            x = load(t, j + k)
            c = larger(a0 + w0 * x, zero)
            if fresh:
                y = _solve_node(c, es, w0 + TINY)
            else:
                y = _newton(x, c, es, w0 + TINY)
            step = y - x
            store(t, j + k, y)
            moved = larger(size(step), moved)
            a0 = a1 - w1 * step
            a1 = a2 - w2 * step
            a2 = a3 - w3 * step
            y2 = y * y
            s1 = s1 + y
            s2 = s2 + y2
            s3 = s3 + y2 * y
            s4 = s4 + y2 * y2
    inv = 1.0 / nodes
    store(moments, _M1, s1 * inv)
    store(moments, _M2, s2 * inv)
    store(moments, _M3, s3 * inv)
    store(moments, _M4, s4 * inv)
    store(moments, _MOVED, moved)


@njit(cache=True, nogil=True, fastmath=FAST)
def _conducted(season, gamma, p, moments, shift):
    """Flux that the orbit conducts at place p when its daily means are moved by shift (p, L)."""
    s = spread(0.0)
    for q in range(moments.shape[0]):
        s = s + season[p, q] * (load(moments[q], _M1) + load(shift, q))
    return gamma * s


@njit(nogil=True, fastmath=FAST, inline="always")
def _emitted(moments, d, es):
    """es <(T + d)^4> of a place whose nodes all move by d, and its slope in d."""
    m1, m2, m3, m4 = load(moments, _M1), load(moments, _M2), load(moments, _M3), load(moments, _M4)
    flux = es * (m4 + d * (4.0 * m3 + d * (6.0 * m2 + d * (4.0 * m1 + d))))
    return flux, es * (4.0 * m3 + d * (12.0 * m2 + d * (12.0 * m1 + 4.0 * d)))


@njit(cache=True, nogil=True, fastmath=FAST)
def _balance(season, gamma, es, absorbed_mean, moments, shift, matrix, step, most, tol):
    """Steps of the daily means, shift (p, L) out, that balance the energy of all places together:
    es <(T + d)^4>[p] + gamma sum_q b[p,q] (<T> + d)[q] = absorbed_mean[p], by Newton's method.

    matrix (p, p, L), step (p, L): room to work in. Elimination needs no pivoting: conduction takes heat out of any
    variation of temperature and emission out of what is left, so that all pivots are positive.
    """
    places = moments.shape[0]
    zero = spread(0.0)
    for p in range(places):
        store(shift, p, zero)
    for _ in range(most):
        for p in range(places):
            flux, slope = _emitted(moments[p], load(shift, p), es)
            rest = load(absorbed_mean, p) - flux - _conducted(season, gamma, p, moments, shift)
            store(step, p, rest)
            for q in range(places):
                store(matrix[p], q, spread(gamma * season[p, q]))
            store(matrix[p], p, load(matrix[p], p) + (slope + TINY))
        for k in range(places):
            inverse = 1.0 / load(matrix[k], k)
            for p in range(k + 1, places):
                ratio = load(matrix[p], k) * inverse
                for q in range(k + 1, places):
                    store(matrix[p], q, load(matrix[p], q) - ratio * load(matrix[k], q))
                store(step, p, load(step, p) - ratio * load(step, k))
        moved = zero
        for k in range(places - 1, -1, -1):
            s = load(step, k)
            for q in range(k + 1, places):
                s = s - load(matrix[k], q) * load(step, q)
            s = s / load(matrix[k], k)
            store(step, k, s)
            d = load(shift, k)
            new = larger(d + s, -0.9 * load(moments[k], _M1))  # below, the quartic in d turns up again
            moved = larger(size(new - d), moved)
            store(shift, k, new)
        if not any_above(moved, tol):
            break


@njit(cache=True, nogil=True, fastmath=FAST)
def _solve(absorbed, weights, season, es, gamma, tol, most_rounds, t, absorbed_mean, moments, shift, out):
    """Temperatures of LANES facets at all places and nodes; out[0]: rounds, out[1]: sweeps, out[2]: the last round's
    largest step of any node, K (what is left is about a ninth of it).

    absorbed (p, n, L) W/m2; weights (p, 2 n); season (p, p) for unit inertia; gamma: thermal inertia;
    t (p, n, L), moments (p, 5, L): result.

    A round sweeps once through the nodes of every place, under the sink of the latest daily means, and then moves all
    daily means together so that energy balances, since what the orbit conducts is shared among all places.
    """
    places, nodes, _ = absorbed.shape
    matrix, step = np.empty((places, places, LANES)), np.empty((places, LANES))
    zero = spread(0.0)
    year = zero
    for p in range(places):
        s = zero
        for j in range(nodes):
            s = s + load(absorbed[p], j)
        store(absorbed_mean, p, s / (1.0 * nodes))
        year = year + s
    # first guess: the daily means were the ground at one temperature all day, and the day before
    guess = root(root(year / (es * nodes * places)))
    for p in range(places):
        store(moments[p], _M1, guess)
        store(moments[p], _M2, guess * guess)
        store(moments[p], _M3, guess * guess * guess)
        store(moments[p], _M4, (guess * guess) * (guess * guess))
        store(moments[p], _MOVED, spread(1e9))
    _balance(season, gamma, es, absorbed_mean, moments, shift, matrix, step, FIRST_STEPS, 0.1)
    for p in range(places):
        store(moments[p], _M1, guess + load(shift, p))
        store(shift, p, zero)
    sweeps, rounds, still = 0, 0, math.inf
    while rounds < most_rounds:
        for p in range(places):
            if rounds == 0:
                for j in range(nodes):
                    store(t[p], j, load(t[p - 1], j) if p > 0 else load(moments[0], _M1))
            sink = _conducted(season, gamma, p, moments, shift)
            for _ in range(3 if rounds == 0 and p == 0 else 1):
                _sweep(any_above(load(moments[p], _MOVED), FAR_K), t[p], absorbed[p], weights[p], es, sink, moments[p])
                sweeps += 1
        _balance(season, gamma, es, absorbed_mean, moments, shift, matrix, step, MEAN_STEPS, 0.1 * tol)
        moved = zero
        for p in range(places):
            d = load(shift, p)
            moved = larger(load(moments[p], _MOVED), moved)
            store(moments[p], _M1, load(moments[p], _M1) + d)
            store(shift, p, zero)
            for j in range(nodes):
                store(t[p], j, larger(load(t[p], j) + d, zero))
        rounds += 1
        if not any_above(moved, tol):
            still = largest(moved)
            break
        still = largest(moved)
    out[0], out[1], out[2] = rounds, sweeps, still


@njit(cache=True, nogil=True, fastmath=FAST)
def _excess(t, absorbed, es, out):
    """Means over a rotation of what is emitted beyond what is absorbed, x = es T^4 - absorbed: <x>, <x cos lambda>,
    <x sin lambda>; lambda falls by 2 pi/n from node to node. t, absorbed (p, n, L); out (3, p, L)."""
    places, nodes, _ = t.shape
    for p in range(places):
        a, b, d = spread(0.0), spread(0.0), spread(0.0)
        for j in range(nodes):
            c = math.cos(2.0 * math.pi * j / nodes) / nodes
            s = -math.sin(2.0 * math.pi * j / nodes) / nodes
            x = load(t[p], j)
            x = es * ((x * x) * (x * x)) - load(absorbed[p], j)
            a = a + x
            b = b + x * c
            d = d + x * s
        store(out[0], p, a / (1.0 * nodes))
        store(out[1], p, b)
        store(out[2], p, d)
