"""Kernels of the periodic lag solver: surface temperatures of several facets in lockstep.

At every place p and rotation node j, per facet (the last axis, L lanes that the processor works through together):

    eps sigma T[p,j]^4 + sum_k w[p,k] T[p,j-k] + sum_q b[p,q] <T>[q] = absorbed[p,j]

w is the conduction operator over a rotation, b the one over the orbit that acts on the daily means; rows of both add
up to nothing. Plain arrays in SI, nothing raised.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

FAST = {"contract", "arcp", "nsz"}  # NaN stays NaN, sums keep their order
MEAN_NEWTON = 4
SEASON_NEWTON = 8


@njit(cache=True, nogil=True, fastmath=FAST)
def _shift_mean(t, lanes, nodes, es, w0, sink_other, absorbed_mean, mean, shift, m2, m3, m4):
    """Move all nodes of a lane by one step so that its energy balances:
    es <(T+d)^4> + w0 (<T>+d) + sink_other = absorbed_mean. mean (L,) in: <T>; out: <T> after."""
    for l in range(lanes):
        m2[l] = 0.0
        m3[l] = 0.0
        m4[l] = 0.0
        mean[l] = 0.0
    for j in range(nodes):
        for l in range(lanes):
            x = t[j, l]
            x2 = x * x
            mean[l] += x
            m2[l] += x2
            m3[l] += x2 * x
            m4[l] += x2 * x2
    inv = 1.0 / nodes
    for l in range(lanes):
        a1, a2, a3, a4 = mean[l] * inv, m2[l] * inv, m3[l] * inv, m4[l] * inv
        goal = absorbed_mean[l] - sink_other[l] - w0 * a1
        d = 0.0
        for _ in range(MEAN_NEWTON):
            value = es * (a4 + d * (4.0 * a3 + d * (6.0 * a2 + d * (4.0 * a1 + d)))) + w0 * d - goal
            slope = es * (4.0 * a3 + d * (12.0 * a2 + d * (12.0 * a1 + 4.0 * d))) + w0
            d -= value / (slope + 1e-300)
            d = max(d, -0.9 * a1)  # the polynomial turns up again below: stay where temperatures are positive
        shift[l] = d
        mean[l] = a1 + d
    for j in range(nodes):
        for l in range(lanes):
            t[j, l] = max(t[j, l] + shift[l], 0.0)


@njit(cache=True, nogil=True, fastmath=FAST)
def _sweep(t, absorbed, weights, lanes, nodes, es, sink, first, row, moved):
    """One Gauss-Seidel pass through the nodes in the order of time; moved (L,): the largest step of each lane, K.

    weights (2 n,): w[n-1], ..., w[0] twice over, so that each node's sum runs over consecutive memory.
    Plainly, for each node j: solve es T[j]^4 + w[0] T[j] = absorbed[j] - sink - sum_{k>0} w[k] T[j-k].
    """
    w0 = weights[nodes - 1]
    for l in range(lanes):
        moved[l] = 0.0
    for j in range(nodes):
        for l in range(lanes):
            row[l] = absorbed[j, l] - sink[l] + w0 * t[j, l]
        base = nodes - 1 - j  # weights[base + i] belongs to T[i]: w[(j - i) mod n]
        i = 0
        while i + 8 <= nodes:
            c0, c1, c2, c3 = weights[base + i], weights[base + i + 1], weights[base + i + 2], weights[base + i + 3]
            c4, c5, c6, c7 = weights[base + i + 4], weights[base + i + 5], weights[base + i + 6], weights[base + i + 7]
            for l in range(lanes):
                row[l] -= (
                    (c0 * t[i, l] + c1 * t[i + 1, l])
                    + (c2 * t[i + 2, l] + c3 * t[i + 3, l])
                    + (c4 * t[i + 4, l] + c5 * t[i + 5, l])
                    + (c6 * t[i + 6, l] + c7 * t[i + 7, l])
                )
            i += 8
        while i < nodes:
            for l in range(lanes):
                row[l] -= weights[base + i] * t[i, l]
            i += 1
        for l in range(lanes):
            c = max(row[l], 0.0)
            x = t[j, l]
            x3 = x * x * x
            y = (3.0 * es * x3 * x + c) / (4.0 * es * x3 + w0 + 1e-300)
            if first:  # a guess far below the root is thrown far above it, but the root is not above this
                y = min(y, math.sqrt(math.sqrt(c / es)))
                x3 = y * y * y
                y = (3.0 * es * x3 * y + c) / (4.0 * es * x3 + w0 + 1e-300)
            moved[l] = max(moved[l], abs(y - x))
            t[j, l] = y


@njit(cache=True, nogil=True, fastmath=FAST)
def _balance_season(means, m3, residual, season, es, gamma, matrix, step):
    """One Newton step for the daily means of one lane, all places at once; step (p,): out, K.

    (4 es <T^3>[p] + gamma b) step = residual, residual (p,) = absorbed - emitted - conducted.
    """
    p_count = means.shape[0]
    for p in range(p_count):
        for q in range(p_count):
            matrix[p, q] = gamma * season[p, q]
        matrix[p, p] += 4.0 * es * m3[p] + 1e-12
    step[:] = np.linalg.solve(matrix, residual)
    for p in range(p_count):
        step[p] = max(step[p], -0.5 * means[p])


@njit(cache=True, nogil=True, fastmath=FAST)
def _first_means(absorbed_mean, season, es, gamma, means, matrix, step):
    """Daily means were the ground at one temperature all day: es T^4 + gamma b T = absorbed, (p,) for one lane."""
    p_count = means.shape[0]
    total = 0.0
    for p in range(p_count):
        total += absorbed_mean[p] / p_count
    start = math.sqrt(math.sqrt(total / es)) + 1e-3
    residual = np.empty(p_count)
    m3 = np.empty(p_count)
    for p in range(p_count):
        means[p] = start
    for _ in range(SEASON_NEWTON):
        for p in range(p_count):
            flow = 0.0
            for q in range(p_count):
                flow += season[p, q] * means[q]
            m3[p] = means[p] ** 3
            residual[p] = absorbed_mean[p] - es * means[p] ** 4 - gamma * flow
        _balance_season(means, m3, residual, season, es, gamma, matrix, step)
        for p in range(p_count):
            means[p] += step[p]


@njit(cache=True, nogil=True, fastmath=FAST)
def _solve(
    absorbed, weights, season, es, gamma, tol, most_rounds, most_sweeps, t, means, absorbed_mean, sink, other, row, moved,
    shift, m2, m3, m4, out,
):  # fmt: skip
    """Temperatures of L facets at all places and nodes; out[0]: rounds, out[1]: sweeps, out[2]: what still moved, K.

    absorbed (p, n, L) W/m2; weights (p, 2 n); season (p, p) for unit inertia; gamma: thermal inertia;
    t (p, n, L), means (p, L): result.

    A round solves the places one after the other, each under the sink that the others' latest means make, and then moves
    all daily means together by Newton's method, since what the orbit conducts is shared among all places.
    """
    places, nodes, lanes = absorbed.shape
    matrix = np.empty((places, places))
    step = np.empty(places)
    residual = np.empty(places)
    cubes = np.empty(places)
    lane_means = np.empty(places)
    lane_absorbed = np.empty(places)
    for p in range(places):
        for l in range(lanes):
            absorbed_mean[p, l] = 0.0
        for j in range(nodes):
            for l in range(lanes):
                absorbed_mean[p, l] += absorbed[p, j, l]
        for l in range(lanes):
            absorbed_mean[p, l] /= nodes
    for l in range(lanes):
        lane_absorbed[:] = absorbed_mean[:, l]
        _first_means(lane_absorbed, season, es, gamma, lane_means, matrix, step)
        means[:, l] = lane_means
    sweeps = 0
    rounds = 0
    still = 0.0
    for r in range(most_rounds):
        rounds = r + 1
        still = 0.0
        for p in range(places):
            for l in range(lanes):
                other[l] = 0.0
            for q in range(places):
                b = gamma * season[p, q]
                if q != p:
                    for l in range(lanes):
                        other[l] += b * means[q, l]
            w0 = gamma * season[p, p]
            if r == 0:  # the day before, or no variation at all, is the guess
                for l in range(lanes):
                    shift[l] = means[p, l] - means[p - 1, l] if p > 0 else 0.0
                for j in range(nodes):
                    for l in range(lanes):
                        t[p, j, l] = max(t[p - 1, j, l] + shift[l], 0.0) if p > 0 else means[p, l]
            worst = 0.0
            for s in range(most_sweeps):
                for l in range(lanes):
                    sink[l] = other[l] + w0 * means[p, l]
                _sweep(t[p], absorbed[p], weights[p], lanes, nodes, es, sink, r == 0 and s < 2, row, moved)
                _shift_mean(t[p], lanes, nodes, es, w0, other, absorbed_mean[p], means[p], shift, m2, m3, m4)
                sweeps += 1
                worst = 0.0
                for l in range(lanes):
                    worst = max(worst, moved[l])
                if worst < tol:
                    break
            still = max(still, 0.0 if worst < tol else worst)
        if places == 1:
            break
        for l in range(lanes):
            for p in range(places):
                flow = 0.0
                for q in range(places):
                    flow += season[p, q] * means[q, l]
                c3 = 0.0
                c4 = 0.0
                for j in range(nodes):
                    x = t[p, j, l]
                    c3 += x * x * x
                    c4 += x * x * x * x
                cubes[p] = c3 / nodes
                residual[p] = absorbed_mean[p, l] - es * c4 / nodes - gamma * flow
                lane_means[p] = means[p, l]
            _balance_season(lane_means, cubes, residual, season, es, gamma, matrix, step)
            for p in range(places):
                still = max(still, abs(step[p]))
                for j in range(nodes):
                    t[p, j, l] += step[p]
                means[p, l] += step[p]
        if still < tol:
            break
    out[0], out[1], out[2] = rounds, sweeps, still


@njit(cache=True, nogil=True, fastmath=FAST)
def _excess(t, absorbed, es, out):
    """Means over a rotation of what is emitted beyond what is absorbed, x = es T^4 - absorbed: <x>, <x cos lambda>,
    <x sin lambda>; lambda falls by 2 pi/n from node to node. t, absorbed (p, n, L); out (3, p, L)."""
    places, nodes, lanes = t.shape
    for p in range(places):
        for l in range(lanes):
            out[0, p, l] = 0.0
            out[1, p, l] = 0.0
            out[2, p, l] = 0.0
        for j in range(nodes):
            c = math.cos(2.0 * math.pi * j / nodes) / nodes
            s = -math.sin(2.0 * math.pi * j / nodes) / nodes
            for l in range(lanes):
                x2 = t[p, j, l] * t[p, j, l]
                x = es * x2 * x2 - absorbed[p, j, l]
                out[0, p, l] += x / nodes
                out[1, p, l] += x * c
                out[2, p, l] += x * s
