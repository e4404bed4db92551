# mypy: ignore-errors
"""Kernel of the marching reference: heat conducted down a grid of cells, step by step, LANES facets at once.

Depth is measured in y = depth * sqrt(rho c / k), the square root of a second, so that of the ground only its thermal
inertia gamma is left: T_t = T_yy, and the flux conducted downwards is -gamma T_y. Node i holds the heat of a cell of
width c[i]; nodes i and i + 1 are h[i] apart; node 0 is the surface, below the last cell nothing flows. In time, BDF2:

    c[i] (1.5 T+ - 2 T + 0.5 T-)[i] / dt = (T+[i-1] - T+[i]) / h[i-1] - (T+[i] - T+[i+1]) / h[i]
    surface:  gamma c[0] (1.5 T+ - 2 T + 0.5 T-)[0] / dt = absorbed - es T+[0]^4 - gamma (T+[0] - T+[1]) / h[0]

All is linear but the surface. With the last cell first, each row gives its node as q[i] + e[i] T+[i-1]; the surface row
then holds one unknown, a T + es T^4 = b, solved by Newton's method; and the nodes follow from the top down.
"""

from __future__ import annotations

import math

from numba import njit

from smallbody.heat._lanes import FAST, any_above, larger, load, size, spread, store

MOST_NEWTON = 80
NEWTON_K = 1e-3  # a Newton step smaller than this leaves less than 1e-8 K

# what `_march` adds up over its steps, rows of sums (4, L): means of T, T^3, T^4 at the surface, and the largest
# difference from what `out` held before
MEAN, CUBE, FOURTH, MOVED = 0, 1, 2, 3


@njit(cache=True, nogil=True, fastmath=FAST)
def _eliminate(h, c, gamma, dt, rows):
    """Coefficients of a step of length dt, the same for all steps.

    rows (4, m) out: u2 and uh (weights of T and T- in q), f (of q[i+1] in q[i]), e (of T+[i-1] in T+[i]); row 0 of each
    belongs to the surface: b = absorbed + u2[0] T[0] + uh[0] T-[0] + f[0] q[1], and e[0] is a.
    """
    m = c.shape[0]
    below = 0.0  # 1/h * e of the node below
    for i in range(m - 1, -1, -1):
        g_up = 1.0 / h[i - 1] if i > 0 else 0.0
        g_down = 1.0 / h[i] if i < m - 1 else 0.0
        pivot = 1.5 * c[i] / dt + g_up + g_down - below
        scale = 1.0 / pivot if i > 0 else gamma
        rows[0, i] = 2.0 * scale * c[i] / dt
        rows[1, i] = -0.5 * scale * c[i] / dt
        rows[2, i] = scale * g_down
        rows[3, i] = scale * g_up if i > 0 else gamma * pivot
        below = g_up * rows[3, i]


@njit(cache=True, nogil=True, fastmath=FAST)
def _average(light, out):
    """Light (n, L) averaged over the equal parts of the period that out (k, L) has rows for; a part is centred on the
    step whose temperatures end it, so that the last of both fall together."""
    n = light.shape[0]
    parts = out.shape[0]
    width = n / parts
    for k in range(parts):
        low = (k + 0.5) * width - 0.5  # step j reaches from j to j + 1
        high = low + width
        i = math.floor(low)
        s = spread(0.0)
        while i < high:
            s = s + (min(high, i + 1.0) - max(low, 1.0 * i)) * load(light, i % n)
            i += 1
        store(out, k, s / width)


@njit(cache=True, nogil=True, fastmath=FAST)
def _march(absorbed, es, rows, state, sums, out):
    """March through the steps of absorbed (n, L), W/m2.

    state (2, m, L): temperatures one step before the last and at the last, K; in: before the first step, out: after the
    last. sums (4, L) out. out (n, L): surface temperatures, K; what it held before is compared.
    """
    n = absorbed.shape[0]
    m = state.shape[1]
    u2, uh, f, e = rows[0], rows[1], rows[2], rows[3]
    zero = spread(0.0)
    s1, s3, s4, moved = zero, zero, zero, zero
    before, now = state[0], state[1]
    es4 = 4.0 * es
    es3 = 3.0 * es
    for j in range(n):
        q = zero
        for i in range(m - 1, 0, -1):  # upwards: q takes the place of the older temperatures
            q = (u2[i] * load(now, i) + uh[i] * load(before, i)) + f[i] * q
            store(before, i, q)
        x = load(now, 0)
        older = load(before, 0)
        b = larger(load(absorbed, j) + (u2[0] * x + uh[0] * older) + f[0] * q, zero)
        x = larger(2.0 * x - older, 0.5 * x)
        cube = x * x * x
        for _ in range(MOST_NEWTON):
            y = (es3 * (cube * x) + b) / (es4 * cube + e[0])
            step = y - x
            x = y
            cube = x * x * x
            if not any_above(size(step), NEWTON_K):
                break
        s1 = s1 + x
        s3 = s3 + cube
        s4 = s4 + cube * x
        moved = larger(size(x - load(out, j)), moved)
        store(out, j, x)
        store(before, 0, x)
        for i in range(1, m):  # downwards
            x = load(before, i) + e[i] * x
            store(before, i, x)
        before, now = now, before
    if n % 2 == 1:
        for i in range(m):
            x = load(state[0], i)
            store(state[0], i, load(state[1], i))
            store(state[1], i, x)
    inv = 1.0 / n
    store(sums, MEAN, s1 * inv)
    store(sums, CUBE, s3 * inv)
    store(sums, FOURTH, s4 * inv)
    store(sums, MOVED, moved)
