"""Mending what needs no guess; the rest is refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from smallbody.errors import ShapeError
from smallbody.shape.check import Edges, check_shape, flat_facets, repeated_facets
from smallbody.shape.model import Shape, Source

COINCIDENT = 1e-9  # vertices nearer than this part of the body's size are one


def mend_shape(shape: Shape) -> tuple[Shape, list[str]]:
    """A usable shape, and what was done to make it so, one line each.

    Coincident vertices are merged; facets without area go (a flat facet whose middle corner lies on another facet's
    edge gives its edge to that one); facets that are there twice remain once, or not at all where they face each
    other; facets are turned to agree with their neighbours, and the whole outwards; idle vertices go.

    raises : ShapeError, where that is not enough: the rest would be a guess
    """
    if not len(shape.facets):
        raise ShapeError(f"{_name(shape)}there are no facets to mend")
    if not np.isfinite(shape.vertices_m).all():
        raise ShapeError(f"{_name(shape)}{check_shape(shape)[0].message}; that cannot be mended")
    done: list[str] = []
    mended = shape
    for step in (_merge, _drop_collapsed, _swap_flat, _drop_repeated, _turn, _drop_idle):
        mended, said = step(mended)
        if said:
            done.append(said)
    left = [fault for fault in check_shape(mended) if fault.serious]
    if left:
        tried = f" (after this: {'; '.join(done)})" if done else ""
        raise ShapeError(f"{_name(shape)}what is left would take a guess: {left[0].message}{tried}", faults=left)
    return (mended, done) if done else (shape, done)


def _name(shape: Shape) -> str:
    return f"{shape.source.name}: " if shape.source is not None else ""


def _said(n: int, one: str, many: str) -> str:
    return f"{n:,} {one if n == 1 else many}"


def _keep_facets(shape: Shape, keep: np.ndarray, facets: np.ndarray | None = None) -> Shape:
    """The shape with only the facets in the mask, perhaps renumbered, and their places in the file."""
    facets = shape.facets if facets is None else facets
    source = shape.source
    if source is not None:
        numbers = np.arange(1, len(facets) + 1) if source.facet_numbers is None else source.facet_numbers
        lines = None if source.facet_lines is None else source.facet_lines[keep]
        source = replace(source, facet_numbers=numbers[keep], facet_lines=lines)
    elif not keep.all():
        source = None
    return replace(shape, facets=facets[keep], source=source, made=None)


def _merge(shape: Shape) -> tuple[Shape, str]:
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    v = shape.vertices_m
    size = float(np.ptp(v, axis=0).max())
    pairs = cKDTree(v).query_pairs(COINCIDENT * size, output_type="ndarray") if size > 0.0 else np.zeros((0, 2), int)
    if not len(pairs):
        return shape, ""
    graph = coo_array((np.ones(len(pairs), dtype=np.int8), (pairs[:, 0], pairs[:, 1])), shape=(len(v), len(v)))
    group = connected_components(graph, directed=False)[1]
    first = np.full(int(group.max()) + 1, len(v))
    np.minimum.at(first, group, np.arange(len(v)))
    target = first[group]
    gone = int((target != np.arange(len(v))).sum())
    merged = _keep_facets(shape, np.ones(len(shape.facets), dtype=bool), target[shape.facets])
    said = _said(gone, "coincident vertex merged", "coincident vertices merged")
    return _drop_vertices(merged, target == np.arange(len(v))), said


def _drop_collapsed(shape: Shape) -> tuple[Shape, str]:
    f = shape.facets
    keep = ~(f == f[:, [1, 2, 0]]).any(axis=1)
    if keep.all():
        return shape, ""
    return _keep_facets(shape, keep), _said(
        int((~keep).sum()), "facet without area dropped", "facets without area dropped"
    )


def _swap_flat(shape: Shape) -> tuple[Shape, str]:
    """A facet with its corners in a line goes; the facet across its long edge is cut in two at the middle corner."""
    flat = flat_facets(shape.vertices_m, shape.facets)
    if not flat.size:
        return shape, ""
    v, facets = shape.vertices_m, shape.facets.copy()
    at: dict[tuple[int, int], int] = {}
    for k, (a, b, c) in enumerate(facets.tolist()):
        at[a, b] = at[b, c] = at[c, a] = k
    keep = np.ones(len(facets), dtype=bool)
    todo, swapped = flat.tolist(), 0
    for _ in range(4 * len(todo)):
        if not todo:
            break
        k = todo.pop(0)
        corners = facets[k].tolist()
        sides = [float(((v[corners[(i + 1) % 3]] - v[corners[i]]) ** 2).sum()) for i in range(3)]
        i = int(np.argmax(sides))
        p, q, m = corners[i], corners[(i + 1) % 3], corners[(i + 2) % 3]
        other = at.get((q, p))
        if other is None or other == k or not keep[other]:
            continue
        d = next((x for x in facets[other].tolist() if x not in (p, q)), m)
        if d == m:
            continue
        facets[k], facets[other] = (m, p, d), (q, m, d)  # k ran p, q, m; the other q, p, d
        for x, y, owner in ((m, p, k), (p, d, k), (d, m, k), (q, m, other), (m, d, other), (d, q, other)):
            at[x, y] = owner
        swapped += 1
        todo += [n for n in (k, other) if flat_facets(v, facets[n : n + 1]).size]
    return _keep_facets(shape, keep, facets), _said(
        swapped, "flat facet", "flat facets"
    ) + " merged into the facet beside" if swapped else ""


def _drop_repeated(shape: Shape) -> tuple[Shape, str]:
    if not repeated_facets(shape.facets)[0].size:
        return shape, ""
    f = shape.facets
    corners = np.sort(f, axis=1)
    _, group = np.unique(corners, axis=0, return_inverse=True)
    group = group.ravel()
    lowest = f.argmin(axis=1)
    second = f[np.arange(len(f)), (lowest + 1) % 3]
    sense = np.where(second == corners[:, 1], 1, -1)
    net = np.bincount(group, weights=sense)
    first = np.full(len(net), len(f))
    wanted = sense == np.sign(net[group])  # those that look the way the majority looks
    np.minimum.at(first, group[wanted], np.flatnonzero(wanted))
    keep = np.zeros(len(f), dtype=bool)
    keep[first[first < len(f)]] = True
    gone = int((~keep).sum())
    if not keep.any():
        return shape, ""
    return _keep_facets(shape, keep), _said(gone, "repeated facet dropped", "repeated facets dropped")


def _turn(shape: Shape) -> tuple[Shape, str]:
    """Facets turned to agree with their neighbours, each piece with its volume positive.

    Every facet is two nodes of a graph, as it is and turned; an edge between facets joins the nodes that agree. Where
    the two nodes of a facet hang together, the surface is one-sided and stays as it is.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    f, n = shape.facets, len(shape.facets)
    edges = Edges(f)
    piece = edges.pieces()
    a, b = edges.pair_facets[:, 0], edges.pair_facets[:, 1]
    shift = np.where(edges.pair_same_sense, n, 0)
    rows = np.concatenate([a, a + n])
    columns = np.concatenate([b + shift, (b + n - shift)])
    graph = coo_array((np.ones(len(rows), dtype=np.int8), (rows, columns)), shape=(2 * n, 2 * n))
    label = connected_components(graph, directed=False)[1]
    if (label[:n] == label[n:]).any():
        return shape, ""
    turned = label[:n] > label[n:]
    v = shape.vertices_m - shape.vertices_m.mean(axis=0)
    p, q, r = (v[f[:, k]] for k in range(3))
    six = np.einsum("ij,ij->i", p, np.cross(q, r)) * np.where(turned, -1.0, 1.0)
    turned ^= (np.bincount(piece, weights=six) < 0.0)[piece]
    count = int(turned.sum())
    if not count:
        return shape, ""
    facets = np.where(turned[:, None], f[:, ::-1], f)
    whole = np.ones(n, dtype=bool)
    return _keep_facets(shape, whole, facets), _said(count, "facet turned outwards", "facets turned outwards")


def _drop_idle(shape: Shape) -> tuple[Shape, str]:
    used = np.zeros(len(shape.vertices_m), dtype=bool)
    used[shape.facets] = True
    if used.all():
        return shape, ""
    return _drop_vertices(shape, used), _said(int((~used).sum()), "idle vertex dropped", "idle vertices dropped")


def _drop_vertices(shape: Shape, keep: np.ndarray) -> Shape:
    number = np.cumsum(keep) - 1
    source: Source | None = shape.source
    if source is not None and source.vertex_lines is not None:
        source = replace(source, vertex_lines=source.vertex_lines[keep])
    return replace(shape, vertices_m=shape.vertices_m[keep], facets=number[shape.facets], source=source)
