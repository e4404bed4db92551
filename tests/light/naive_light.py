"""Twins of the light room's kernels that nobody could get wrong, and small bodies to try them on."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np

from smallbody.light import Horizons
from smallbody.shape import Shape, make_shape

# Bodies


def box(low, high, cuts=1):
    """A box; each of its sides is cuts x cuts squares of two facets."""
    low, high = np.asarray(low, float), np.asarray(high, float)
    vertices, facets = [], []
    step = np.arange(cuts + 1) / cuts
    for axis in range(3):
        for side in (0, 1):
            i, j = (axis + 1) % 3, (axis + 2) % 3
            grid = np.empty((cuts + 1, cuts + 1, 3))
            grid[..., axis], grid[..., i], grid[..., j] = side, step[:, None], step[None, :]
            first = len(vertices)
            vertices.extend(grid.reshape(-1, 3))
            for a in range(cuts):
                for b in range(cuts):
                    k = first + a * (cuts + 1) + b
                    p, q, r, s = k, k + cuts + 1, k + cuts + 2, k + 1
                    two = [(p, q, r), (p, r, s)]
                    facets.extend(two if side else [t[::-1] for t in two])
    points, same = np.unique(np.round(vertices, 9), axis=0, return_inverse=True)
    return Shape(low + points * (high - low), same.reshape(-1)[np.array(facets)])


def together(*shapes):
    """Several closed surfaces as one: parts may float free of each other."""
    start = np.cumsum([0, *(len(s.vertices_m) for s in shapes)])
    return Shape(
        np.concatenate([s.vertices_m for s in shapes]), np.concatenate([s.facets + k for s, k in zip(shapes, start)])
    )


def jagged(facets=180, rough=0.35, seed=0):
    """A sphere whose corners were pulled and pushed at random: concave everywhere. Metres."""
    ball = make_shape("sphere", facets)
    rng = np.random.default_rng(seed)
    return Shape(ball.vertices_m * np.exp(rough * rng.standard_normal(len(ball.vertices_m)))[:, None], ball.facets)


def doughnut(around=18, across=10, tilt=0.5, bend=0.15):
    """A torus, tilted and bent: no point sees all of it, and no ray from the middle meets it only once. Metres."""
    u, v = np.meshgrid(2 * np.pi * np.arange(around) / around, 2 * np.pi * np.arange(across) / across, indexing="ij")
    r = 3.0 + (1.0 + 0.2 * np.cos(3 * u)) * np.cos(v)
    points = np.stack([r * np.cos(u), r * np.sin(u), (1.0 + 0.2 * np.cos(3 * u)) * np.sin(v)], -1).reshape(-1, 3)
    points[:, 2] += bend * (points[:, 0] ** 2 - points[:, 1] ** 2) / 3
    i, j = np.meshgrid(np.arange(around), np.arange(across), indexing="ij")

    def at(a, b):
        return (a % around) * across + b % across

    p, q, r_, s = at(i, j), at(i + 1, j), at(i + 1, j + 1), at(i, j + 1)
    facets = np.concatenate([np.stack([p, q, r_], -1).reshape(-1, 3), np.stack([p, r_, s], -1).reshape(-1, 3)])
    c, n = np.cos(tilt), np.sin(tilt)
    return Shape(points @ np.array([[1, 0, 0], [0, c, -n], [0, n, c]]).T, facets)


def convex(count=300, axes=(900.0, 500.0, 300.0), seed=0):
    """The convex hull of points on an ellipsoid: unlike facets, none of which sees another. Metres."""
    from scipy.spatial import ConvexHull

    points = np.random.default_rng(seed).standard_normal((count, 3))
    points = points / np.linalg.norm(points, axis=1, keepdims=True) * axes
    facets = ConvexHull(points).simplices
    a, b, c = (points[facets[:, k]] for k in range(3))
    inward = np.einsum("ij,ij->i", np.cross(b - a, c - a), a) < 0
    facets[inward] = facets[inward][:, ::-1]
    return Shape(points, facets)


def turned_about_z(shape, angle):
    c, s = np.cos(angle), np.sin(angle)
    return shape.turned(np.array([[c, -s, 0], [s, c, 0], [0, 0, 1.0]]))


# Rays


def rays_blocked(shape, points, own, directions, off=0.0):
    """Does the ray from each point in each direction (points, directions) meet a facet other than its own?

    points (n, 3); own (n,) facet that each lies on; directions (k, 3). A facet counts as widened by `off` in
    barycentric units, narrowed if it is negative.
    source : T. Moeller & B. Trumbore 1997, J. Graphics Tools 2, 21; every ray against every facet
    """
    a, b, c = (shape.vertices_m[shape.facets[:, k]] for k in range(3))
    e1, e2 = b - a, c - a
    out = np.empty((len(points), len(directions)), bool)
    for k, d in enumerate(directions):
        h = np.cross(d, e2)
        det = np.einsum("fi,fi->f", e1, h)
        level = np.abs(det) < 1e-13 * np.linalg.norm(e1, axis=1) * np.linalg.norm(e2, axis=1)
        inverse = np.where(level, 0.0, 1.0 / np.where(level, 1.0, det))
        s = points[:, None, :] - a[None]
        u = np.einsum("nfi,fi->nf", s, h) * inverse
        q = np.cross(s, e1[None])
        v = q @ d * inverse
        t = np.einsum("nfi,fi->nf", q, e2) * inverse
        hit = (u >= -off) & (v >= -off) & (u + v <= 1 + off) & (t > 0) & ~level
        hit[np.arange(len(points)), own] = False
        out[:, k] = hit.any(axis=1)
    return out


# Intervals of the sky


def union(intervals, touch):
    """Sorted, separate intervals that cover the same numbers; those closer than touch become one."""
    out = []
    for lo, hi in sorted(intervals):
        if out and lo <= out[-1][1] + touch:
            out[-1][1] = max(out[-1][1], hi)
        else:
            out.append([lo, hi])
    return out


def narrowest_gap_closed(intervals):
    gaps = [b[0] - a[1] for a, b in pairwise(intervals)]
    k = int(np.argmin(gaps))
    return [*intervals[:k], [intervals[k][0], intervals[k + 1][1]], *intervals[k + 2 :]]


def _half(points, inside):
    """The part of a convex polygon (list of points) where inside(point) >= 0."""
    out = []
    for p, q in zip(points, points[1:] + points[:1]):
        a, b = inside(p), inside(q)
        if a >= 0:
            out.append(p)
        if (a < 0) != (b < 0):
            out.append(p + a / (a - b) * (q - p))
    return out


def blocked_on_meridian(shape, point, own, longitude):
    """Intervals of sin(latitude) hidden on one meridian from a point of facet `own`: every facet, front or back."""
    outward = np.array([np.cos(longitude), np.sin(longitude), 0.0])
    aside = np.array([-np.sin(longitude), np.cos(longitude), 0.0])
    n = shape.normals[own]
    found = []
    for t, corners in enumerate(shape.vertices_m[shape.facets]):
        if t == own:
            continue
        d = corners @ aside - point @ aside
        if (d >= 0).all() or (d < 0).all():
            continue
        ends = [
            corners[i] + d[i] / (d[i] - d[j]) * (corners[j] - corners[i]) - point
            for i, j in ((0, 1), (1, 2), (2, 0))
            if (d[i] >= 0) != (d[j] >= 0)
        ]
        part = _half(_half(ends, lambda p: p @ outward), lambda p: p @ n)
        sines = [p[2] / np.hypot(p @ outward, p[2]) for p in part if np.hypot(p @ outward, p[2]) > 0]
        if len(sines) > 1:
            found.append((min(sines), max(sines)))
    return union(found, 1e-9)


def tabulated(horizons, facet, sample, column):
    """The intervals that a table keeps, list of (low, high)."""
    row = horizons.rows[facet]
    if row < 0:
        return []
    at = (row * len(horizons.shifts) + sample) * horizons.columns + column
    part = slice(horizons.starts[at], horizons.starts[at + 1])
    return [(float(a), float(b)) for a, b in zip(horizons.low[part], horizons.high[part])]


def longitude_of(horizons, sample, column):
    return 2 * np.pi * (column + horizons.shifts[sample]) / horizons.columns


def only_sample(horizons, sample):
    """The table of one of the sample points alone."""
    s = len(horizons.shifts)
    counts, low, high = [], [], []
    for facet in horizons.shadowed_facets:
        for column in range(horizons.columns):
            kept = tabulated(horizons, facet, sample, column)
            counts.append(len(kept))
            low.extend(a for a, _ in kept)
            high.extend(b for _, b in kept)
    assert 0 <= sample < s
    return replace(
        horizons,
        shifts=horizons.shifts[sample : sample + 1],
        samples=horizons.samples[:, sample : sample + 1],
        starts=np.concatenate([[0], np.cumsum(counts)]).astype(horizons.starts.dtype),
        low=np.array(low, np.float32),
        high=np.array(high, np.float32),
    )


def free_at(horizons, facet, sample, column, sin_latitude):
    return not any(a < sin_latitude < b for a, b in tabulated(horizons, facet, sample, column))


def share_that_sees(horizons, facet, sin_latitude, turns):
    """Share of the samples that see the Sun, each asking its nearest meridian."""
    seen = 0
    for s, shift in enumerate(horizons.shifts):
        lons = (np.arange(horizons.columns) + shift) / horizons.columns
        away = np.abs((turns - lons + 0.5) % 1.0 - 0.5)
        seen += free_at(horizons, facet, s, int(np.argmin(away)), sin_latitude)
    return seen / len(horizons.shifts)


def tables_equal(one: Horizons, two: Horizons, off=0.0):
    """Same intervals on every meridian, their ends within off."""
    assert one.columns == two.columns
    assert np.array_equal(one.shifts, two.shifts)
    assert np.array_equal(one.rows, two.rows)
    assert np.array_equal(one.starts, two.starts)
    assert np.abs(one.low - two.low).max(initial=0) <= off
    assert np.abs(one.high - two.high).max(initial=0) <= off
    return True


# Light


def open_sky(normal, sin_lat, cos_lat, longitudes):
    """mu at body longitudes of the Sun, (n,)."""
    u = np.stack([cos_lat * np.cos(longitudes), cos_lat * np.sin(longitudes), np.full_like(longitudes, sin_lat)], -1)
    return np.maximum(0.0, u @ normal)


def day_means(normal, sin_lat, cos_lat, steps=40_000):
    """<mu> and <mu exp(i lambda)> under an open sky, by counting."""
    lon = 2 * np.pi * (np.arange(steps) + 0.5) / steps
    mu = open_sky(normal, sin_lat, cos_lat, lon)
    return mu.mean(), (mu * np.exp(1j * lon)).mean()


def turned_mean(first, second, v):
    """Mean over a rotation of flux times body vector v in the frame where the Sun has no y; first <q>, second <q e>."""
    flat = np.conj(second) * (v[0] + 1j * v[1])
    return np.array([flat.real, flat.imag, first * v[2]])


def light_sums_at(shape, horizons, sin_lat, cos_lat):
    """The sums at one place: all of the open sky, less what is blocked at each sample and meridian.

    returns : lambert (3,), lever (3,), across, lit_lever (3,), mean mu (f,)
    """
    lambert, lever, across, lit = np.zeros(3), np.zeros(3), 0.0, np.zeros(3)
    means = np.zeros(len(shape.facets))
    s, columns = len(horizons.shifts), horizons.columns
    for f in range(len(shape.facets)):
        n, r, area = shape.normals[f], shape.centroids_m[f], shape.areas_m2[f]
        first, second = day_means(n, sin_lat, cos_lat)
        lit += area * turned_mean(first, second, r)
        for k in range(s):
            for c in range(columns):
                if free_at(horizons, f, k, c, sin_lat):
                    continue
                lon = np.array([longitude_of(horizons, k, c)])
                mu = open_sky(n, sin_lat, cos_lat, lon)[0] / (s * columns)
                turn = mu * np.exp(1j * lon[0])
                first -= mu
                second -= turn
                lit -= area * turned_mean(mu, turn, horizons.samples[f, k])
        means[f] = first
        lambert += area * turned_mean(first, second, n)
        lever += area * turned_mean(first, second, np.cross(r, n))
        across += area * first
    return lambert, lever, across, lit, means
