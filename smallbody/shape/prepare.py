"""From the [shape] part of a body description to the shape that light and heat are asked of."""

from __future__ import annotations

import math
import warnings
from typing import TYPE_CHECKING

import numpy as np

from smallbody.errors import Note, ShapeError
from smallbody.shape.check import require_usable
from smallbody.shape.files import read_shape
from smallbody.shape.make import make_shape
from smallbody.shape.model import Shape

if TYPE_CHECKING:
    from smallbody.body import ShapeSource

METRES = {"km": 1000.0, "m": 1.0}
FAR_OFF_DEG = 5.0  # between file axis and greatest-moment axis: more than this is worth a note
TOO_LARGE_KM = 1000.0  # larger than any body that sunlight moves: the length unit is probably wrong


def prepare_shape(source: ShapeSource) -> Shape:
    """The shape read or made, checked, brought to size, centre of mass at the origin, spin axis along z.

    source : the [shape] part of a body description
    raises : ShapeError, if the shape cannot be read or used
    warns : Note, for faults that stop nothing, when the file's z axis is more than 5 degrees from the axis of greatest
        moment, and when the body is larger than 1000 km (probably wrong units)
    """
    metres = METRES[source.length_unit]
    if source.file is not None:
        shape = read_shape(source.file, length_unit=source.length_unit)
    elif source.sphere_facets is not None:
        shape = make_shape("sphere", source.sphere_facets)
    elif source.ellipsoid_axes is not None:
        axes_km = [a * metres / 1000.0 for a in source.ellipsoid_axes]
        shape = make_shape("ellipsoid", source.facets or 2000, axes=axes_km)
    else:
        raise ShapeError("[shape] names no file, sphere_facets or ellipsoid_axes")
    for fault in require_usable(shape):
        name = f"{shape.source.name}: " if shape.source is not None else ""
        warnings.warn(f"{name}{fault.message}", Note, stacklevel=2)

    if source.diameter_km is not None:
        shape = shape.scaled(1000.0 * source.diameter_km / shape.diameter_m)
    shape = shape.moved(-shape.mass.centre_m)
    if source.spin_axis == "principal":
        shape = shape.turned(_shortest_turn(shape.mass.axes[2], np.array([0.0, 0.0, 1.0])))
    elif (tilt := spin_tilt_deg(shape)) > FAR_OFF_DEG:
        warnings.warn(
            f"the file's z axis is {tilt:.1f} degrees from the axis of greatest moment; "
            'shape.spin_axis = "principal" spins about that one',
            Note,
            stacklevel=2,
        )
    if shape.diameter_m > 1000.0 * TOO_LARGE_KM:
        warnings.warn(
            f"the body is {shape.diameter_m / 1000.0:,.0f} km across; is shape.length_unit right?", Note, stacklevel=2
        )
    return shape


def spin_tilt_deg(shape: Shape) -> float:
    """Angle between z and the nearest axis about which the moment is greatest, degrees.

    Where the greatest moments agree to 1e-6, any axis between theirs has the greatest moment; for a sphere, all have.
    """
    moments, axes = shape.mass.moments_m5, shape.mass.axes
    greatest = moments > moments[2] * (1.0 - 1e-6)
    along = math.sqrt(float((axes[greatest, 2] ** 2).sum()))
    return math.degrees(math.acos(min(1.0, along)))


def _shortest_turn(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """Rotation matrix that takes one unit vector to another, not opposite, the shortest way (Rodrigues)."""
    axis = np.cross(start, end)
    cosine = float(start @ end)
    if cosine < -1.0 + 1e-12:
        raise ShapeError("no shortest turn between opposite directions")
    k = np.array([[0.0, -axis[2], axis[1]], [axis[2], 0.0, -axis[0]], [-axis[1], axis[0], 0.0]])
    return np.eye(3) + k + k @ k / (1.0 + cosine)
