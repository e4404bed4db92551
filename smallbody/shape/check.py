"""Is a surface a solid's? Every fault is named, with the facets (and lines of the file) where it is."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from smallbody.errors import ShapeError
from smallbody.shape.model import Shape

# A facet is degenerate when its height over its longest edge is below this part of that edge: coordinates with the six
# or seven digits that files carry cannot say which way such a facet looks.
FLAT = 1e-7
MOST_PAIRS = 5_000_000_000  # of boxes looked at for crossings, some ten seconds
NAMED = 3  # how many facets a message names; `Fault.facets` has all of them


@dataclass(frozen=True)
class Fault:
    """Something wrong with a surface.

    kind : "empty", "coordinate", "degenerate", "duplicate", "open", "crowded", "sense", "pieces", "inverted", "solid",
        "crossing" or "unused"
    message : one line of text
    facets : 1-based numbers of the facets concerned, as the file counts them
    lines : 1-based lines of the file, empty where unknown
    serious : the surface cannot be used with it; the others are worth knowing
    """

    kind: str
    message: str
    facets: tuple[int, ...] = ()
    lines: tuple[int, ...] = ()
    serious: bool = True


def check_shape(shape: Shape) -> list[Fault]:
    """All that keeps a surface from being the boundary of one solid body; empty when there is nothing.

    Asked are: finite coordinates; facets with area, each there once; every edge shared by exactly two facets that run
    along it in opposite senses; one connected surface; facets outward (positive volume), with the moments of a solid.
    Not serious, since published shapes have them and results hardly feel them: facets that cut through each other, and
    vertices that no facet uses.
    """
    v, f = shape.vertices_m, shape.facets
    if not len(f):
        return [Fault("empty", "the shape has no facets")]
    faults = []
    finite = np.isfinite(v).all(axis=1)
    if not finite.all():
        first = int(np.flatnonzero(~finite)[0])
        broken = np.flatnonzero(~finite[f].all(axis=1))
        line = _vertex_lines(shape, np.array([first]))
        at = f" (line {line[0]})" if line else ""
        text = f"vertex {first + 1}{at} is at {v[first].tolist()}: coordinates must be finite"
        faults.append(_fault("coordinate", text, shape, broken, name_facets=False))
        return faults  # nothing else can be measured

    degenerate = flat_facets(v, f)
    if degenerate.size:
        faults.append(
            _fault("degenerate", f"{_count(degenerate, 'facet has', 'facets have')} no area", shape, degenerate)
        )
    repeats, originals = repeated_facets(f)
    if repeats.size:
        text = f"{_count(repeats, 'facet is', 'facets are')} there more than once"
        faults.append(_fault("duplicate", text, shape, np.unique(np.concatenate([originals, repeats]))))

    edges = Edges(f)
    for kind, where, text in (
        ("open", edges.single, "belong to one facet only: the surface is open there"),
        ("crowded", edges.crowded, "belong to more than two facets"),
        ("sense", edges.same_sense, "are run along in the same sense by both facets: one of them looks inwards"),
    ):
        if where.size:
            said = text if where.size > 1 else text.replace("belong ", "belongs ").replace("are run", "is run")
            facets = edges.facets_of(where)
            faults.append(_fault(kind, f"{where.size:,} {'edges' if where.size > 1 else 'edge'} {said}", shape, facets))

    piece = edges.pieces()
    n_pieces = int(piece.max()) + 1
    if n_pieces > 1:
        sizes = np.bincount(piece)
        small = np.flatnonzero(piece != sizes.argmax())
        text = f"the surface falls into {n_pieces:,} pieces, the largest of {sizes.max():,} facets; others"
        faults.append(_fault("pieces", text, shape, small))
    if not faults:
        mass = shape.mass
        spread = 0.5 * mass.moments_m5.sum() - mass.moments_m5  # second moments about the three planes of the axes
        if not mass.volume_m3 > 0.0:
            faults.append(Fault("inverted", f"the volume is {mass.volume_m3:.4g} m3: the facets are turned inwards"))
        elif not (spread > 0.0).all():
            faults.append(Fault("solid", "the moments are those of no solid body: parts of the surface are inside out"))
        crossing = crossing_facets(v, f)
        if crossing.size:
            text = f"{_count(crossing, 'facet cuts', 'facets cut')} through others"
            faults.append(replace(_fault("crossing", text, shape, crossing), serious=False))

    used = np.zeros(len(v), dtype=bool)
    used[f] = True
    if not used.all():
        idle = np.flatnonzero(~used)
        lines = _vertex_lines(shape, idle)
        verb = "vertex belongs" if idle.size == 1 else "vertices belong"
        first_one = f"(the first: vertex {idle[0] + 1}{f', line {lines[0]}' if lines else ''})"
        faults.append(Fault("unused", f"{idle.size:,} {verb} to no facet {first_one}", (), lines, serious=False))
    return faults


def require_usable(shape: Shape) -> list[Fault]:
    """The faults that stop nothing, for a shape that can be used.

    raises : ShapeError, naming the first serious fault; `details["faults"]` has all
    """
    found = check_shape(shape)
    faults = [fault for fault in found if fault.serious]
    if faults:
        name = f"{shape.source.name}: " if shape.source is not None else ""
        others = f" (and {len(faults) - 1} other faults)" if len(faults) > 2 else " (and one other fault)"
        raise ShapeError(f"{name}{faults[0].message}{others if len(faults) > 1 else ''}", faults=faults)
    return found


class Edges:
    """Edges of a surface, each with the facets along it.

    facets : (f, 3) vertex numbers
    """

    def __init__(self, facets: np.ndarray) -> None:
        f = np.asarray(facets, dtype=np.int64)
        start = f.T.ravel()  # edge k of all facets, then edge k + 1
        end = f[:, [1, 2, 0]].T.ravel()
        self.n_facets = len(f)
        self._facet = np.tile(np.arange(len(f)), 3)
        n = int(f.max()) + 1 if len(f) else 1
        key = np.minimum(start, end) * n + np.maximum(start, end)
        self._order = np.argsort(key, kind="stable")
        key = key[self._order]
        self._first = np.flatnonzero(np.concatenate([[True], key[1:] != key[:-1]])) if len(key) else np.zeros(0, int)
        self.count = np.diff(np.append(self._first, len(key)))
        self._up = (start < end)[self._order]
        self.single = np.flatnonzero(self.count == 1)
        self.crowded = np.flatnonzero(self.count > 2)
        pair = np.flatnonzero(self.count == 2)
        at = self._first[pair]
        left, right = self._facet[self._order[at]], self._facet[self._order[at + 1]] if len(at) else at
        self.pair_facets = np.stack([left, right], axis=1)
        self.pair_same_sense = self._up[at] == self._up[at + 1] if len(at) else np.zeros(0, bool)
        self.same_sense = pair[self.pair_same_sense]

    def facets_of(self, edges: np.ndarray) -> np.ndarray:
        """Facets along these edges, each once, ascending."""
        chosen = np.zeros(len(self.count), dtype=bool)
        chosen[edges] = True
        return np.unique(self._facet[self._order][np.repeat(chosen, self.count)])

    def pieces(self) -> np.ndarray:
        """(f,) which connected piece each facet belongs to; facets connect where they share an edge."""
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import connected_components

        facet = self._facet[self._order]
        same_edge = np.ones(len(facet), dtype=bool)
        same_edge[self._first] = False
        right = np.flatnonzero(same_edge)
        a, b = facet[right - 1], facet[right]
        graph = coo_array((np.ones(len(a), dtype=np.int8), (a, b)), shape=(self.n_facets, self.n_facets))
        return np.asarray(connected_components(graph, directed=False)[1])


def crossing_facets(vertices: np.ndarray, facets: np.ndarray) -> np.ndarray:
    """Numbers of the facets that others pass through; facets that only touch do not count.

    Boxes are swept along the body's longest extent. On surfaces of very many long facets the search is given up.
    """
    from smallbody.shape._crossing import crossing_facets as kernel

    longest = int(np.ptp(vertices[facets].reshape(-1, 3), axis=0).argmax())
    p = np.ascontiguousarray(np.roll(vertices, -longest, axis=1))
    corners = p[facets]
    low, high = corners.min(axis=1), corners.max(axis=1)
    out = np.zeros(len(facets), dtype=np.bool_)
    kernel(p, facets, low, high, np.argsort(low[:, 0], kind="stable"), MOST_PAIRS, out)
    return np.flatnonzero(out)


def flat_facets(vertices: np.ndarray, facets: np.ndarray) -> np.ndarray:
    """Numbers of the facets without area: a corner twice, or three corners in one line (to one part in ten million)."""
    a, b, c = (vertices[facets[:, k]] for k in range(3))
    with np.errstate(over="ignore", invalid="ignore", under="ignore"):
        longest = np.maximum(np.maximum(_squared(b - a), _squared(c - b)), _squared(a - c))
        unit = 1.0 / np.sqrt(np.where(longest > 0.0, longest, 1.0))[:, None]
        doubled = np.sqrt(_squared(np.cross((b - a) * unit, (c - a) * unit)))
    twice = (facets == facets[:, [1, 2, 0]]).any(axis=1)
    return np.flatnonzero(twice | ~(doubled > FLAT))


def repeated_facets(facets: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Facets with the same three corners as an earlier one, and the earlier ones."""
    corners = np.sort(facets, axis=1)
    order = np.lexsort((corners[:, 2], corners[:, 1], corners[:, 0]))
    sorted_corners = corners[order]
    same = (sorted_corners[1:] == sorted_corners[:-1]).all(axis=1)
    if not same.any():
        return np.zeros(0, dtype=int), np.zeros(0, dtype=int)
    start = np.concatenate([[True], ~same])
    group_first = order[np.flatnonzero(start)][np.cumsum(start) - 1]
    repeats = order[1:][same]
    return np.sort(repeats), np.unique(group_first[1:][same])


def _squared(d: np.ndarray) -> np.ndarray:
    return np.asarray(np.einsum("ij,ij->i", d, d))


def _vertex_lines(shape: Shape, vertices: np.ndarray) -> tuple[int, ...]:
    if shape.source is None or shape.source.vertex_lines is None:
        return ()
    return tuple(shape.source.vertex_lines[vertices].tolist())


def _count(what: np.ndarray, one: str, many: str) -> str:
    return f"{what.size:,} {one if what.size == 1 else many}"


def _fault(kind: str, text: str, shape: Shape, facets: ArrayLike, name_facets: bool = True) -> Fault:
    at = np.asarray(facets, dtype=int)
    source = shape.source
    numbers = at + 1 if source is None or source.facet_numbers is None else source.facet_numbers[at]
    lines = np.zeros(0, dtype=int) if source is None or source.facet_lines is None else source.facet_lines[at]
    if name_facets and at.size:
        shown = ", ".join(str(n) for n in numbers[:NAMED]) + (", ..." if at.size > NAMED else "")
        text += f" (facet{'s' if at.size > 1 else ''} {shown}"
        if lines.size:
            shown = ", ".join(str(n) for n in lines[:NAMED]) + (", ..." if at.size > NAMED else "")
            text += f"; line{'s' if at.size > 1 else ''} {shown}"
        text += ")"
    return Fault(kind, text, tuple(numbers.tolist()), tuple(lines.tolist()))
