"""Near-uniform triangles on the unit sphere."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

FEWEST = 20


def sphere_facet_counts(up_to: int) -> np.ndarray:
    """Facet counts that `sphere_grid` can make: 20 n^2 and 60 n^2, ascending."""
    n = np.arange(1, math.isqrt(max(up_to, FEWEST) // 20) + 3)
    return np.unique(np.concatenate([20 * n**2, 60 * n**2]))


def nearest_facet_count(facets: int) -> int:
    """The count of `sphere_facet_counts` nearest to the one asked for, by ratio."""
    counts = sphere_facet_counts(facets)
    return int(counts[np.abs(np.log(counts / facets)).argmin()])


@dataclass(frozen=True)
class Grid:
    """A geodesic grid.

    points : (v, 3) unit vectors
    facets : (f, 3) outward
    steps : n, the parts of each side of a base face
    base : 20 or 60 faces
    numbers : (base, n + 1, n + 1) vertex i steps from the first towards the second corner of a face and j towards the
        third; -1 where i + j > n
    """

    points: np.ndarray
    facets: np.ndarray
    steps: int
    base: int
    numbers: np.ndarray

    def carry(self, values: np.ndarray, to: Grid) -> np.ndarray:
        """Values at the vertices of this grid (v, ...), linear within facets, at those of another on the same base."""
        n, m = self.steps, to.steps
        i, j = np.nonzero(to.numbers[0] >= 0)
        x, y = i * (n / m), j * (n / m)
        i0, j0 = np.minimum(x.astype(int), n - 1), np.minimum(y.astype(int), n - 1)
        i0 = np.where(i0 + j0 > n - 1, n - 1 - j0, i0)  # on the far side, rounding must not step over it
        u, v = x - i0, y - j0
        upper = (u + v > 1.0 + 1e-12) & (i0 + j0 < n - 1)
        low, right, left = (self.numbers[:, i0 + di, j0 + dj] for di, dj in ((0, 0), (1, 0), (0, 1)))
        far = self.numbers[:, np.where(upper, i0 + 1, i0), np.where(upper, j0 + 1, j0)]
        weights = np.where(upper, [u + v - 1.0, 1.0 - v, 1.0 - u], [1.0 - u - v, u, v])
        first = np.where(upper, far, low)
        mixed = sum(w[:, None] * values[k] for w, k in zip(weights, (first, right, left)))
        out = np.empty((len(to.points), *values.shape[1:]))
        out[to.numbers[:, i, j]] = mixed
        return out


def sphere_grid(facets: int) -> Grid:
    """The geodesic grid with the number of facets nearest to the one asked for.

    facets : made are 20 n^2 (each face of an icosahedron in n^2) or 60 n^2 (each face first in three)

    The grid has the symmetry of the icosahedron with a five-fold axis along z, mirror planes among it, so that what
    vanishes on a sphere by symmetry vanishes on the grid too.
    """
    count = nearest_facet_count(facets)
    n = math.isqrt(count // 20)
    return grid_on(20, n) if 20 * n * n == count else grid_on(60, math.isqrt(count // 60))


def grid_on(base: int, steps: int) -> Grid:
    """The geodesic grid on 20 or 60 base faces with their sides in so many parts."""
    corners, faces = _icosahedron()
    if base == 60:
        centres = corners[faces].sum(axis=1)
        centres /= np.linalg.norm(centres, axis=1)[:, None]
        faces = _thirds(faces, len(corners))
        corners = np.concatenate([corners, centres])
    return _subdivide(corners, faces, steps)


def _icosahedron() -> tuple[np.ndarray, np.ndarray]:
    z, r = 1.0 / math.sqrt(5.0), 2.0 / math.sqrt(5.0)
    fifth = 2.0 * math.pi / 5.0
    upper = [(r * math.cos(k * fifth), r * math.sin(k * fifth), z) for k in range(5)]
    lower = [(r * math.cos((k + 0.5) * fifth), r * math.sin((k + 0.5) * fifth), -z) for k in range(5)]
    corners = np.array([(0.0, 0.0, 1.0), *upper, *lower, (0.0, 0.0, -1.0)])
    faces = []
    for k in range(5):
        u, u1, d, d1 = 1 + k, 1 + (k + 1) % 5, 6 + k, 6 + (k + 1) % 5
        faces += [(0, u, u1), (u, d, u1), (u1, d, d1), (11, d1, d)]
    return corners, np.array(faces)


def _thirds(faces: np.ndarray, first_centre: int) -> np.ndarray:
    """Triangles between the centres of neighbouring faces and the corners they share (60 of them for 20 faces)."""
    owner = {}
    for k, face in enumerate(faces.tolist()):
        for i in range(3):
            owner[face[i], face[(i + 1) % 3]] = k
    out = []
    for (a, b), k in owner.items():
        if a < b:
            left, right = first_centre + k, first_centre + owner[b, a]
            out += [(a, right, left), (b, left, right)]
    return np.array(sorted(out))


def _subdivide(corners: np.ndarray, faces: np.ndarray, n: int) -> Grid:
    """Every face in n^2, equal steps of angle along its sides, points on the unit sphere."""
    edges = np.unique(np.sort(faces[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1), axis=0)
    edge_number = {(a, b): k for k, (a, b) in enumerate(edges.tolist())}
    theta = float(np.arccos(np.clip((corners[edges[:, 0]] * corners[edges[:, 1]]).sum(axis=1), -1, 1)).mean())

    steps = np.arange(1, n)
    along = _blend(corners[edges], np.stack([n - steps, steps], axis=1) / n, theta)
    i, j = (a.ravel() for a in np.meshgrid(np.arange(n + 1), np.arange(n + 1), indexing="ij"))
    keep = i + j <= n
    i, j = i[keep], j[keep]  # row i from corner 0, place j along it: weights (n - i - j, i, j) / n
    inner = (i > 0) & (j > 0) & (i + j < n)
    inside = _blend(corners[faces], np.stack([n - i - j, i, j], axis=1)[inner] / n, theta)
    vertices = np.concatenate([corners, along.reshape(-1, 3), inside.reshape(-1, 3)])

    place = {(int(a), int(b)): k for k, (a, b) in enumerate(zip(i, j))}
    number = np.empty((len(faces), len(i)), dtype=np.int64)
    number[:, inner] = (
        len(corners) + along.shape[0] * (n - 1) + np.arange(inside.shape[0] * inside.shape[1]).reshape(inside.shape[:2])
    )
    for k, face in enumerate(faces.tolist()):
        for corner, at in zip(face, ((0, 0), (n, 0), (0, n))):
            number[k, place[at]] = corner
        sides = ((0, 1, [(s, 0) for s in range(1, n)]), (0, 2, [(0, s) for s in range(1, n)]),
                 (1, 2, [(n - s, s) for s in range(1, n)]))  # fmt: skip
        for first, last, cells in sides:
            a, b = face[first], face[last]
            ids = len(corners) + edge_number[min(a, b), max(a, b)] * (n - 1) + np.arange(n - 1)
            number[k, [place[c] for c in cells]] = ids if a < b else ids[::-1]
    up = [(place[a, b], place[a + 1, b], place[a, b + 1]) for a, b in place if a + b < n]
    down = [(place[a + 1, b], place[a + 1, b + 1], place[a, b + 1]) for a, b in place if a + b < n - 1]
    facets = number[:, np.array(up + down)].reshape(-1, 3)
    numbers = np.full((len(faces), n + 1, n + 1), -1)
    numbers[:, i, j] = number
    return Grid(vertices, facets, n, len(faces), numbers)


def _blend(points: np.ndarray, weights: np.ndarray, theta: float) -> np.ndarray:
    """Unit vectors between the points of each row: (rows, weights, 3). Exact arcs along sides."""
    mixed = np.einsum("wk,rkx->rwx", np.sin(weights * theta), points)
    return np.asarray(mixed / np.linalg.norm(mixed, axis=2, keepdims=True))
