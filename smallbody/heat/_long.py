# mypy: ignore-errors
"""Kernel of the lag solver for one long period: a sweep that looks back over the latest nodes only.

What is older than that reaches the kernel as a flux, worked out between sweeps. LANES facets at once, SI, nothing
raised.
"""

from __future__ import annotations

from numba import njit

from smallbody.heat._lanes import FAST, larger, load, root, size, smaller, spread, store

TINY = 1e-300


@njit(cache=True, nogil=True, fastmath=FAST)
def _sweep_near(t, known, weights, es, moments):
    """One pass through the nodes in the order of time: es T[j]^4 + sum_{k < m} w[k] T[j-k] = known[j].

    t (n, L) K, guess in, better guess out; known (n, L): absorbed less the flux of older nodes; weights (m,), m <= n.
    moments (5, L) out: means of T, T^2, T^3, T^4, and the largest step.
    """
    nodes = t.shape[0]
    m = weights.shape[0]
    w0 = weights[0] + TINY
    zero = spread(0.0)
    s1, s2, s3, s4, moved = zero, zero, zero, zero, zero
    for j in range(nodes):
        a, b = load(known, j), zero
        k = 1
        while k + 1 < m:
            i = j - k if j >= k else j - k + nodes
            h = j - k - 1 if j >= k + 1 else j - k - 1 + nodes
            a = a - weights[k] * load(t, i)
            b = b - weights[k + 1] * load(t, h)
            k += 2
        while k < m:
            i = j - k if j >= k else j - k + nodes
            a = a - weights[k] * load(t, i)
            k += 1
        c = larger(a + b, zero)
        x = load(t, j)
        y = smaller(root(root(c / es)), c / w0)  # two bounds above the root; Newton's steps come down from them
        for _ in range(4):
            x3 = es * (y * y * y)
            y = (3.0 * (x3 * y) + c) / (4.0 * x3 + w0)
        moved = larger(size(y - x), moved)
        store(t, j, y)
        y2 = y * y
        s1 = s1 + y
        s2 = s2 + y2
        s3 = s3 + y2 * y
        s4 = s4 + y2 * y2
    inv = 1.0 / nodes
    store(moments, 0, s1 * inv)
    store(moments, 1, s2 * inv)
    store(moments, 2, s3 * inv)
    store(moments, 3, s4 * inv)
    store(moments, 4, moved)
