"""Slow twins of the shape room that nobody could get wrong, and small surfaces to ask them of."""

from __future__ import annotations

import math
from collections import Counter

import numpy as np

from smallbody.shape import Shape

CUBE_CORNERS = np.array([(x, y, z) for x in (0.0, 1.0) for y in (0.0, 1.0) for z in (0.0, 1.0)])
CUBE_QUADS = np.array([(0, 1, 3, 2), (4, 6, 7, 5), (0, 4, 5, 1), (2, 3, 7, 6), (0, 2, 6, 4), (1, 5, 7, 3)])


def cube(side_m: float = 1.0) -> Shape:
    """A cube with one corner at the origin, 12 facets."""
    return Shape(CUBE_CORNERS * side_m, CUBE_QUADS[:, [[0, 1, 2], [0, 2, 3]]].reshape(-1, 3))


def tetrahedron(corners: list[tuple[float, float, float]]) -> Shape:
    """A tetrahedron with outward facets."""
    shape = Shape(np.array(corners), np.array([(0, 2, 1), (0, 1, 3), (0, 3, 2), (1, 2, 3)]))
    return shape if shape.mass.volume_m3 > 0 else Shape(shape.vertices_m, shape.facets[:, ::-1])


def twin_mass(vertices: np.ndarray, facets: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
    """Volume, centre and inertia about the centre, tetrahedron by tetrahedron from the origin.

    The second moments of a tetrahedron are those of four masses of 1/20 at its corners and one of 16/20 at its centre.
    """
    volume, first, second = 0.0, np.zeros(3), np.zeros((3, 3))
    for a, b, c in vertices[facets]:
        v = float(a @ np.cross(b, c)) / 6.0
        middle = (a + b + c) / 4.0
        volume += v
        first += v * middle
        for mass, point in ((v / 20, a), (v / 20, b), (v / 20, c), (v * 16 / 20, middle)):
            second += mass * np.outer(point, point)
    centre = first / volume
    second -= volume * np.outer(centre, centre)
    return volume, centre, np.trace(second) * np.eye(3) - second


def twin_edge_faults(facets: np.ndarray) -> dict[str, int]:
    """How many edges belong to one facet, to more than two, and are run along in the same sense by both of two."""
    both: Counter[tuple[int, int]] = Counter()
    directed: Counter[tuple[int, int]] = Counter()
    for facet in facets.tolist():
        for k in range(3):
            a, b = facet[k], facet[(k + 1) % 3]
            both[min(a, b), max(a, b)] += 1
            directed[a, b] += 1
    return {
        "open": sum(n == 1 for n in both.values()),
        "crowded": sum(n > 2 for n in both.values()),
        "sense": sum(n == 2 and directed[edge] != 1 for edge, n in both.items()),
    }


def twin_pieces(facets: np.ndarray) -> int:
    """Connected pieces, facets hanging together by edges: a flood from facet to facet."""
    owners: dict[tuple[int, ...], list[int]] = {}
    for k, facet in enumerate(facets.tolist()):
        for i in range(3):
            owners.setdefault(tuple(sorted((facet[i], facet[(i + 1) % 3]))), []).append(k)
    todo, pieces = set(range(len(facets))), 0
    while todo:
        pieces += 1
        stack = [todo.pop()]
        while stack:
            facet = facets[stack.pop()].tolist()
            for i in range(3):
                for other in owners[tuple(sorted((facet[i], facet[(i + 1) % 3])))]:
                    if other in todo:
                        todo.remove(other)
                        stack.append(other)
    return pieces


def twin_crossing(p: np.ndarray, facets: np.ndarray) -> set[int]:
    """Facets that an edge passes through, and those edges' own facets, solving for the meeting point pair by pair."""
    crossing: set[int] = set()
    for i, one in enumerate(facets.tolist()):
        for j, two in enumerate(facets.tolist()):
            if i == j or len(set(one) & set(two)) >= 2:
                continue
            for s, e in ((one[0], one[1]), (one[1], one[2]), (one[2], one[0])):
                if s in two or e in two:
                    continue
                a, b, c = p[two]
                matrix = np.stack([b - a, c - a, p[s] - p[e]], axis=1)
                if abs(np.linalg.det(matrix)) < 1e-14:
                    continue
                beta, gamma, along = np.linalg.solve(matrix, p[s] - a)
                if min(beta, gamma, 1 - beta - gamma, along, 1 - along) > 1e-6:
                    crossing |= {i, j}
    return crossing


def twin_spread(p: np.ndarray, f: np.ndarray, density: np.ndarray, step: float) -> np.ndarray:
    """Every vertex moved along the surface towards the middle of the facets around it, weighted by area and density."""
    out = p.copy()
    for v in range(len(p)):
        around = [facet for facet in f.tolist() if v in facet]
        doubled = [np.cross(p[b] - p[a], p[c] - p[a]) for a, b, c in around]
        weights = np.array([np.linalg.norm(n) * density[facet].mean() for n, facet in zip(doubled, around)])
        middle = np.average([p[facet].mean(axis=0) for facet in around], axis=0, weights=weights)
        normal = np.sum(doubled, axis=0)
        normal /= np.linalg.norm(normal)
        away = middle - p[v]
        out[v] = p[v] + step * (away - (away @ normal) * normal)
    return out


def twin_harmonics_sum(coefficients: np.ndarray, u: np.ndarray) -> np.ndarray:
    """Sum of real spherical harmonics by their definition: derivatives of the Legendre polynomials, no recursion."""
    total = np.zeros(len(u))
    s, z, lon = np.hypot(u[:, 0], u[:, 1]), u[:, 2], np.arctan2(u[:, 1], u[:, 0])
    for l in range(len(coefficients)):
        for m in range(l + 1):
            legendre = np.polynomial.legendre.Legendre.basis(l)
            p = s**m * (legendre.deriv(m) if m else legendre)(z)
            norm = math.sqrt((2 if m else 1) * (2 * l + 1) * math.factorial(l - m) / math.factorial(l + m))
            total += norm * p * (coefficients[l, m, 0] * np.cos(m * lon) + coefficients[l, m, 1] * np.sin(m * lon))
    return total


def same_facets(one: Shape, two: Shape, atol: float) -> bool:
    """Whether two shapes have the same triangles in the same order, to atol metres, vertex numbers left aside."""
    if len(one.facets) != len(two.facets):
        return False
    return bool(np.abs(one.vertices_m[one.facets] - two.vertices_m[two.facets]).max() <= atol)
