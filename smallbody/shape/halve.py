"""Half the facets, to see whether a denser shape would matter."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from smallbody.errors import ShapeError
from smallbody.shape.check import require_usable
from smallbody.shape.model import Shape


def halved(shape: Shape) -> Shape:
    """See `Shape.halved`."""
    half = _made_again(shape) if shape.made is not None else _thinned(shape)
    require_usable(half)
    half = half.scaled(float(np.cbrt(shape.mass.volume_m3 / half.mass.volume_m3)))
    return half.moved(shape.mass.centre_m - half.mass.centre_m)


def _made_again(shape: Shape) -> Shape:
    from smallbody.shape.make import KINDS, make_shape

    assert shape.made is not None
    made = shape.made
    half = make_shape(made.kind, max(len(shape.facets) // 2, KINDS[made.kind].fewest), made.seed, **made.numbers)
    if len(half.facets) >= len(shape.facets):
        raise ShapeError(f"a {made.kind} of {len(shape.facets)} facets cannot be made with half as many")
    return half._mapped(np.array(made.frame))


def _thinned(shape: Shape) -> Shape:
    import fast_simplification

    target = len(shape.facets) // 2
    if target < 4:
        raise ShapeError(f"a shape of {len(shape.facets)} facets cannot be halved")
    size = float(np.ptp(shape.vertices_m, axis=0).max())
    centre = shape.mass.centre_m
    points = np.ascontiguousarray((shape.vertices_m - centre) / size, dtype=np.float64)
    points, facets = fast_simplification.simplify(
        points, np.ascontiguousarray(shape.facets, dtype=np.int32), target_count=target
    )
    return replace(
        shape,
        vertices_m=np.asarray(points, dtype=np.float64) * size + centre,
        facets=np.asarray(facets, dtype=np.int64),
        source=None,
    )
