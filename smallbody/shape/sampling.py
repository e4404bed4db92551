"""Points inside facets at which something may be asked, such as whether the Sun is seen."""

from __future__ import annotations

import numpy as np

from smallbody.errors import ShapeError
from smallbody.shape.model import Shape


def facet_samples(shape: Shape, lit_samples: int) -> np.ndarray:
    """Points spread evenly in each facet: (f, lit_samples, 3), m.

    shape : Shape, f facets
    lit_samples : 1 (the centroid), 4 (centroids of the four triangles between corners and mid-edges) or 16 (once more)
    raises : ShapeError, if lit_samples is another number

    All points of a facet stand for equal areas, and their mean is the centroid.
    """
    if lit_samples not in (1, 4, 16):
        raise ShapeError(f"lit_samples is 1, 4 or 16 points in a facet, not {lit_samples!r}")
    triangles = np.eye(3)[None]  # barycentric corners
    while len(triangles) < lit_samples:
        a, b, c = triangles[:, 0], triangles[:, 1], triangles[:, 2]
        ab, bc, ca = (a + b) / 2, (b + c) / 2, (c + a) / 2
        parts = [(a, ab, ca), (ab, b, bc), (ca, bc, c), (ab, bc, ca)]
        triangles = np.stack([np.stack(p, axis=1) for p in parts], axis=1).reshape(-1, 3, 3)
    weights = triangles.mean(axis=1)
    return np.asarray(np.einsum("sk,fkx->fsx", weights, shape.vertices_m[shape.facets]))
