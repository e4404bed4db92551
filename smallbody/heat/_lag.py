# mypy: ignore-errors
"""Kernels of the periodic lag solver: surface temperatures of a block of facets, in lockstep.

At every place p and rotation node j, per facet (the last axis, LANES of them, one vector: see `_lanes`):

    eps sigma T[p,j]^4 + sum_k w[p,k] T[p,j-k] + sum_q b[p,q] <T>[q] = absorbed[p,j]

w is the conduction operator over a rotation, b the one over the orbit that acts on the daily means; rows of both add
up to nothing. Plain arrays in SI, nothing raised.
"""

from __future__ import annotations

import math

from numba import njit

from smallbody.heat._lanes import FAST, any_above, larger, largest, load, root, size, smaller, spread, store

FAR = 0.05  # a sweep that moved a node by more of the daily mean is followed by one that trusts no guess
BRISK = 20  # rounds that take whole steps
FIRST_STEPS = 30  # most Newton rounds for the daily means of a ground at one temperature all day
MEAN_STEPS = 20  # the same for the daily means after each round of sweeps
HOLD = 1.0 / 0.7  # holds back passes over the places: without it they diverge where the orbit conducts much
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
def _sweep(fresh, pace, t, absorbed, weights, es, sink, moments):
    """One Gauss-Seidel pass through the nodes in the order of time; moments (5, L) out.

    weights (2 n,): w[n-1], ..., w[0] twice over, so that each node's sum runs over consecutive memory.
    Plainly, for each node j: `pace` of one Newton step (of three if `fresh`) towards
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
            step = pace * (y - x)
            y = x + step
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
def _balance(season, pull, gamma, es, absorbed_mean, moments, shift, most, tol):
    """Steps of the daily means, shift (p, L) out, that balance the energy of all places together:
    es <(T + d)^4>[p] + gamma sum_q b[p,q] (<T> + d)[q] = absorbed_mean[p], by Newton steps from place to place, and
    after each such pass one step of all places together, to which the conduction does not object (rows of b add up to
    nothing).

    pull (p,): column sums of season
    """
    places = moments.shape[0]
    zero = spread(0.0)
    for p in range(places):
        store(shift, p, zero)
    for _ in range(most):
        moved = zero
        for p in range(places):
            d = load(shift, p)
            flux, slope = _emitted(moments[p], d, es)
            m1 = load(moments[p], _M1)
            rest = flux + _conducted(season, gamma, p, moments, shift) - load(absorbed_mean, p)
            own = gamma * season[p, p] * HOLD
            new = larger(d - rest / (slope + (own + TINY)), -0.9 * m1)
            if any_above(new - d - 0.5 * m1, 0.0):
                # a Newton step from the cold is thrown far above the root, but the root is not above this
                goal = larger(flux - rest + own * (m1 + d), zero)
                new = smaller(new, larger(root(root(goal / es)) - m1, -0.9 * m1))
            moved = larger(size(new - d), moved)
            store(shift, p, new)
        rest, slope = zero, spread(TINY)
        for p in range(places):
            d = load(shift, p)
            flux, steep = _emitted(moments[p], d, es)
            rest = rest + (flux - load(absorbed_mean, p)) + (gamma * pull[p]) * (load(moments[p], _M1) + d)
            slope = slope + steep
        step = rest / slope
        moved = larger(size(step), moved)
        for p in range(places):  # below -0.9 of the mean the quartic in d turns up again
            store(shift, p, larger(load(shift, p) - step, -0.9 * load(moments[p], _M1)))
        if not any_above(moved, tol):
            break


@njit(cache=True, nogil=True, fastmath=FAST)
def _solve(absorbed, weights, season, pull, es, gamma, tol, most_rounds, t, absorbed_mean, moments, shift, out):
    """Temperatures of LANES facets at all places and nodes; out[0]: rounds, out[1]: sweeps, out[2]: the last round's
    largest step of any node, as a share of its facet's hottest daily mean (what is left is about a ninth of it).

    absorbed (p, n, L) W/m2; weights (p, 2 n), with gamma b[p,p]/n added to each; season (p, p) for unit inertia, pull
    (p,) its column sums; gamma: thermal inertia; t (p, n, L), moments (p, 5, L): result.

    A round sweeps once through the nodes of every place, under the sink of the latest daily means, and then moves all
    daily means together so that energy balances, since what the orbit conducts is shared among all places.
    """
    places, nodes, _ = absorbed.shape
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
    _balance(season, pull, gamma, es, absorbed_mean, moments, shift, FIRST_STEPS, 0.1)
    for p in range(places):
        store(moments[p], _M1, guess + load(shift, p))
        store(shift, p, zero)
    sweeps, rounds, still = 0, 0, math.inf
    while rounds < most_rounds:
        pace = 1.0 if rounds < BRISK else 0.5  # what has not settled by then swings to and fro
        for p in range(places):
            if rounds == 0:
                for j in range(nodes):
                    store(t[p], j, load(t[p - 1], j) if p > 0 else load(moments[0], _M1))
            sink = _conducted(season, gamma, p, moments, shift) - (gamma * season[p, p]) * load(moments[p], _M1)
            for _ in range(3 if rounds == 0 and p == 0 else 1):
                far = any_above(load(moments[p], _MOVED) - FAR * load(moments[p], _M1), 0.0)
                _sweep(far, pace, t[p], absorbed[p], weights[p], es, sink, moments[p])
                sweeps += 1
        _balance(season, pull, gamma, es, absorbed_mean, moments, shift, MEAN_STEPS, 10.0 * tol)
        moved, hottest = zero, spread(TINY)
        for p in range(places):
            d = load(shift, p)
            moved = larger(load(moments[p], _MOVED), moved)
            hottest = larger(load(moments[p], _M1), hottest)
            store(moments[p], _M1, load(moments[p], _M1) + d)
            store(shift, p, zero)
            for j in range(nodes):
                store(t[p], j, larger(load(t[p], j) + d, zero))
        rounds += 1
        still = largest(moved / hottest)
        if still <= tol:
            break
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
