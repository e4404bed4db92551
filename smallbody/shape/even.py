"""Facets spread evenly over a star-shaped body."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from smallbody.shape.grid import Grid, grid_on, sphere_grid

Radius = Callable[[np.ndarray], np.ndarray]  # (n, 3) unit vectors to (n,) distances from the body's middle
# (n, 3) unit vectors to the numbers, from 1, of the creases nearest to them, and the nearest directions on those
Creases = Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]

COARSEST = 5  # steps of the first grid
ROUNDS = 80  # of moving vertices on each grid but the last
LAST_ROUNDS = 32  # on the last, between swaps of edges
SLIVER = 0.45  # quality below which no facet is pressed to reach a crease
CREASE_ROUNDS = 10  # of putting vertices on creases and swapping edges along them
REACH = 0.45  # vertices nearer to a crease than this part of their distance from each other are put on it
ON = 1e-12  # radians: nearer to a crease is on it
STEP = 0.8  # of the way to the middle of the facets around


def even_surface(
    radius: Radius, facets: int, creases: Creases | None = None, density: Radius | None = None
) -> tuple[np.ndarray, np.ndarray]:
    """Vertices (v, 3) and facets (f, 3), outward, of a body given by its radius in every direction.

    radius : positive, continuous
    facets : as for `sphere_grid`; their number is kept
    density : where facets should be finer: how many times as many an area, as a function of direction like radius
    creases : where the surface has an edge or a furrow that facets should not lie across

    Vertices move along the surface towards the middle of the facets around them (Lloyd's method with centroids, area
    for weight), first on coarse grids that carry them far, then on finer ones; on the finest, edges are swapped where
    that betters the worse of two facets. No facet ever turns over as seen from the middle, so the surface stays closed
    and cannot cut through itself.
    """
    last = sphere_grid(facets)
    steps = [last.steps]
    while steps[-1] > 2 * COARSEST:
        steps.append(steps[-1] // 2)
    grid: Grid | None = None
    directions = np.empty((0, 3))
    for n in reversed(steps):
        finer = last if n == last.steps else grid_on(last.base, n)
        if grid is None:
            directions = _stretched(radius, finer)
        else:
            # points on the coarse facets, not directions, which would leave gaps at sharp ends
            directions = _unit(grid.carry(directions * radius(directions)[:, None], finer))
            if not _faces_out(directions, finer.facets):
                directions = finer.points
        grid = finer
        if n != last.steps:
            directions = _spread(radius, directions, grid.facets, ROUNDS, density)
    return _finish(radius, directions, last.facets, creases, density)


def _stretched(radius: Radius, grid: Grid) -> np.ndarray:
    """Directions of the grid's points after the linear map that gives a sphere the second moments of the surface.

    On a long body these are far more even than the grid's own directions, which crowd at the waist.
    """
    p = grid.points * radius(grid.points)[:, None]
    a, b, c = (p[grid.facets[:, k]] for k in range(3))
    doubled = np.cross(b - a, c - a)
    area = np.sqrt((doubled**2).sum(axis=1))
    middle = (a + b + c) / 3.0
    second = np.einsum("f,fi,fj->ij", area, middle, middle) / area.sum()
    squares, axes = np.linalg.eigh(second)
    return _unit(grid.points @ (axes * np.sqrt(squares)) @ axes.T)


def _unit(v: np.ndarray) -> np.ndarray:
    return np.asarray(v / np.sqrt((v**2).sum(axis=1))[:, None])


def _faces_out(u: np.ndarray, f: np.ndarray) -> bool:
    a, b, c = (u[f[:, k]] for k in range(3))
    return bool((np.einsum("ij,ij->i", a, np.cross(b, c)) > 0.0).all())


def _spread(
    radius: Radius, directions: np.ndarray, facets: np.ndarray, rounds: int, density: Radius | None
) -> np.ndarray:
    from smallbody.shape._relax import hold_back, spread

    u = directions.copy()
    normal, weight, moved = np.empty_like(u), np.empty(len(u)), np.empty_like(u)
    even = np.ones(len(u))
    for _ in range(rounds):
        wanted = even if density is None else density(u)
        spread(u * radius(u)[:, None], facets, wanted, STEP, normal, weight, moved)
        new = _unit(moved)
        hold_back(u, new, facets)
        u = new
    return u


def _finish(
    radius: Radius, directions: np.ndarray, facets: np.ndarray, creases: Creases | None, density: Radius | None
) -> tuple[np.ndarray, np.ndarray]:
    from smallbody.shape._relax import neighbours, swap_edges

    f = facets.copy()
    n = len(directions)
    key = (f * n + f[:, [1, 2, 0]]).ravel()
    order = np.argsort(key)
    across = np.empty_like(f)
    neighbours(f, (key[order], order // 3, n), across)
    degree = np.bincount(f.ravel(), minlength=n)
    u, on = directions, np.zeros(n, dtype=np.int64)

    def swap(regular: bool) -> None:
        p = u * radius(u)[:, None]
        for _ in range(10):
            if not swap_edges(p, f, across, degree, on, regular):
                break

    for _ in range(LAST_ROUNDS // 4):
        swap(True)
        u = _spread(radius, u, f, 4, density)
    if creases is not None:
        for _ in range(CREASE_ROUNDS):
            number, there = creases(u)
            gap = np.sqrt(((there - u) ** 2).sum(axis=1))
            near = (gap < REACH * _spacing(radius, u, f)) | _nearer_ends_of_crossing_edges(u, number, there, gap, f)
            on = np.where(near, number, 0)
            u = _pulled(radius, u, np.where(on[:, None] > 0, there, u), f)
            on = np.where(np.sqrt(((there - u) ** 2).sum(axis=1)) < ON, on, 0)
            swap(False)
            moved = _spread(radius, u, f, 2, density)
            u = _pulled(radius, moved, np.where(on[:, None] > 0, u, moved), f)
        on = np.where(np.sqrt(((creases(u)[1] - u) ** 2).sum(axis=1)) < ON, on, 0)
    swap(False)
    return u * radius(u)[:, None], f


def _pulled(radius: Radius, u: np.ndarray, new: np.ndarray, f: np.ndarray) -> np.ndarray:
    """The new directions, but the old ones around facets that would turn over or become slivers."""
    from smallbody.shape._relax import hold_back

    new = new.copy()
    before = _quality(u * radius(u)[:, None], f)
    for _ in range(20):
        hold_back(u, new, f)
        now = _quality(new * radius(new)[:, None], f)
        bad = f[(now < SLIVER) & (now < before)].ravel()
        bad = bad[(new[bad] != u[bad]).any(axis=1)]
        if not bad.size:
            return new
        new[bad] = u[bad]
    return u


def _quality(p: np.ndarray, f: np.ndarray) -> np.ndarray:
    """4 sqrt(3) area over the sum of squared sides, (f,): 1 for equilateral facets, 0 for slivers."""
    a, b, c = (p[f[:, k]] for k in range(3))
    sides = ((b - a) ** 2 + (c - b) ** 2 + (a - c) ** 2).sum(axis=1)
    return np.asarray(2.0 * np.sqrt(3.0) * np.sqrt((np.cross(b - a, c - a) ** 2).sum(axis=1)) / sides)


def _nearer_ends_of_crossing_edges(
    u: np.ndarray, number: np.ndarray, there: np.ndarray, gap: np.ndarray, f: np.ndarray
) -> np.ndarray:
    """(v,) whether a vertex is the end nearer to a crease of an edge that runs across it."""
    start, end = f.T.ravel(), f[:, [1, 2, 0]].T.ravel()
    away = u - there
    crossing = (number[start] > 0) & (number[start] == number[end]) & (gap[start] > ON) & (gap[end] > ON)
    crossing &= np.einsum("ij,ij->i", away[start], away[end]) < 0.0
    start, end = start[crossing], end[crossing]
    out = np.zeros(len(u), dtype=bool)
    out[np.where(gap[start] <= gap[end], start, end)] = True
    return out


def _spacing(radius: Radius, u: np.ndarray, f: np.ndarray) -> np.ndarray:
    """Typical distance of a vertex from its neighbours, seen from the middle, radians."""
    r = radius(u)
    p = u * r[:, None]
    a, b, c = (p[f[:, k]] for k in range(3))
    area = 0.5 * np.sqrt((np.cross(b - a, c - a) ** 2).sum(axis=1))
    cell = np.bincount(f.ravel(), weights=np.repeat(area, 3) / 3.0, minlength=len(u))
    return np.asarray(np.sqrt(cell * 2.0 / np.sqrt(3.0)) / r)
