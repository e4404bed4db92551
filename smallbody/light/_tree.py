# mypy: ignore-errors
"""Kernels: a bounding-volume tree over facets. Plain arrays in, nothing raised."""

from __future__ import annotations

import numpy as np
from numba import njit

LEAF = 8


@njit(cache=True, nogil=True)
def _build(low, high, middle, order, node_low, node_high, node_start, node_end, node_skip):
    """Median-split tree in depth-first order; returns the number of nodes.

    low, high, middle (f, 3): box and middle of each facet; order (f,): facets, permuted in place.
    node_skip[i] is where to go on when node i is passed over; an inner node's first child is i + 1.
    """
    f = order.shape[0]
    todo = np.empty((128, 2), np.int64)  # start, end
    count = 0
    todo[0, 0], todo[0, 1] = 0, f
    depth = 1
    while depth > 0:
        depth -= 1
        start, end = todo[depth, 0], todo[depth, 1]
        node = count
        count += 1
        node_start[node], node_end[node] = start, end
        for a in range(3):
            lo, hi = np.inf, -np.inf
            for i in range(start, end):
                lo = min(lo, low[order[i], a])
                hi = max(hi, high[order[i], a])
            node_low[node, a], node_high[node, a] = lo, hi
        if end - start <= LEAF:
            continue
        best, axis = -1.0, 0
        for a in range(3):
            lo, hi = np.inf, -np.inf
            for i in range(start, end):
                lo = min(lo, middle[order[i], a])
                hi = max(hi, middle[order[i], a])
            if hi - lo > best:
                best, axis = hi - lo, a
        part = order[start:end].copy()
        keys = np.empty(end - start)
        for i in range(end - start):
            keys[i] = middle[part[i], axis]
        ranks = np.argsort(keys)
        for i in range(end - start):
            order[start + i] = part[ranks[i]]
        half = (start + end) // 2
        todo[depth, 0], todo[depth, 1] = half, end
        depth += 1
        todo[depth, 0], todo[depth, 1] = start, half
        depth += 1
    for i in range(count - 1, -1, -1):  # children stand behind their parent, the first one right behind it
        leaf = node_end[i] - node_start[i] <= LEAF
        node_skip[i] = i + 1 if leaf else node_skip[node_skip[i + 1]]
    return count


@njit(cache=True, nogil=True)
def _above_plane(n0, n1, n2, d, node_low, node_high, node_start, node_end, node_skip, nodes, order, corners, found):
    """Facets with a corner above the plane n.x = d: fills found, returns how many.

    corners (f, 3, 3): corners of each facet. The box's farthest corner along n decides whether a node is entered.
    """
    count = 0
    node = 0
    while node < nodes:
        reach = (
            n0 * (node_high[node, 0] if n0 > 0.0 else node_low[node, 0])
            + n1 * (node_high[node, 1] if n1 > 0.0 else node_low[node, 1])
            + n2 * (node_high[node, 2] if n2 > 0.0 else node_low[node, 2])
        )
        if reach <= d:
            node = node_skip[node]
            continue
        if node_end[node] - node_start[node] <= LEAF:
            for i in range(node_start[node], node_end[node]):
                t = order[i]
                for k in range(3):
                    if n0 * corners[t, k, 0] + n1 * corners[t, k, 1] + n2 * corners[t, k, 2] > d:
                        found[count] = t
                        count += 1
                        break
            node = node_skip[node]
        else:
            node += 1
    return count
