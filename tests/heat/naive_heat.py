"""Twins of the heat kernels that nobody could get wrong: one facet, all equations together, dense or banded Newton."""

import numpy as np
from scipy.linalg import solve_banded


def naive_step(now, before, absorbed, es, gamma, dt, gaps, width):
    """One BDF2 step of (m,) temperatures, all rows of the nonlinear system together."""
    m = len(width)
    t = now.copy()
    for _ in range(100):
        down = gamma * (t[:-1] - t[1:]) / gaps  # flux from node i to node i + 1
        residual = gamma * width * (1.5 * t - 2 * now + 0.5 * before) / dt
        residual[:-1] += down
        residual[1:] -= down
        residual[0] += es * t[0] ** 4 - absorbed
        band = np.zeros((3, m))
        band[1] = 1.5 * gamma * width / dt
        band[1, :-1] += gamma / gaps
        band[1, 1:] += gamma / gaps
        band[1, 0] += 4 * es * t[0] ** 3
        band[0, 1:] = -gamma / gaps
        band[2, :-1] = -gamma / gaps
        step = solve_banded((1, 1), band, residual)
        t = t - step
        if np.abs(step).max() < 1e-11:
            break
    return t


def naive_march(light, es, gamma, dt, gaps, width, before, now):
    """Surface temperatures (n,) for light (n,), and the last two temperature profiles."""
    surface = []
    for absorbed in light:
        before, now = now, naive_step(now, before, absorbed, es, gamma, dt, gaps, width)
        surface.append(now[0])
    return np.array(surface), before, now


def naive_average(light, parts):
    """Light (n,) averaged over equal parts, each centred on the step that ends it, by sampling finely."""
    n, fine = len(light), 4000
    out = []
    for k in range(parts):
        at = ((k + 0.5) + (np.arange(fine) + 0.5) / fine) * (n / parts) - 0.5
        out.append(light[np.floor(at).astype(int) % n].mean())
    return np.array(out)


def naive_lag(absorbed, weights, season, es, gamma):
    """Temperatures (p, n) of one facet under absorbed (p, n): Newton's method on all places and nodes at once.

    weights (p, n): w[k] of the conducted flux sum_k w[k] T[j - k]; season (p, p) for unit inertia
    """
    p, n = absorbed.shape
    size = p * n
    matrix = np.zeros((size, size))
    for a in range(p):
        for j in range(n):
            for k in range(n):
                matrix[a * n + j, a * n + (j - k) % n] += weights[a, k]
            for b in range(p):
                matrix[a * n + j, b * n : (b + 1) * n] += gamma * season[a, b] / n
    q = absorbed.ravel()
    t = np.full(size, (q.max() / es) ** 0.25)  # above the answer: Newton's steps come down
    for _ in range(200):
        step = np.linalg.solve(matrix + np.diag(4 * es * t**3 + 1e-12), matrix @ t + es * t**4 - q)
        t = np.maximum(t - step, 0.3 * t)
        if np.abs(step).max() < 1e-10:
            break
    return t.reshape(p, n)
