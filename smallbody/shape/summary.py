"""What there is to say about a shape."""

from __future__ import annotations

from typing import Any

import numpy as np

from smallbody.shape.check import Edges, check_shape
from smallbody.shape.model import Shape
from smallbody.shape.prepare import spin_tilt_deg


def describe(shape: Shape) -> dict[str, Any]:
    """Facts about a shape, plain numbers, lists and text that go into JSON; None for what a faulty shape does not have.

    vertices, facets, handles : counts; handles are tunnels through the body (0 for a ball), None if not closed
    volume_m3, area_m2, diameter_m : diameter of the sphere of the same volume
    extents_m : along x, y, z; principal_extents_m : along the axes of least, middle and greatest moment
    centre_m : centre of mass
    moments_m5 : principal moments for unit density, ascending; moment_ratios : of the two lower to the greatest
    axes : rows are the principal axes; spin_tilt_deg : between the file's z and the axis of greatest moment
    edge_m : {"min", "median", "max"}; smallest_angle_deg : of all facets
    usable : no serious fault; faults : list of {"kind", "message", "facets", "lines", "serious"}
    sha256 : of vertices and facets
    """
    faults = check_shape(shape)
    usable = not any(fault.serious for fault in faults)
    v, f = shape.vertices_m, shape.facets
    out: dict[str, Any] = {"vertices": len(v), "facets": len(f), "handles": None}
    out |= dict.fromkeys(["volume_m3", "area_m2", "diameter_m", "extents_m", "principal_extents_m", "centre_m"])
    out |= dict.fromkeys(["moments_m5", "moment_ratios", "axes", "spin_tilt_deg", "edge_m", "smallest_angle_deg"])
    if len(f) and np.isfinite(v).all():
        sides = np.sqrt(((v[f] - v[f[:, [1, 2, 0]]]) ** 2).sum(axis=2))
        out["area_m2"] = float(shape.areas_m2.sum())
        out["extents_m"] = shape.extents_m.tolist()
        out["edge_m"] = {"min": float(sides.min()), "median": float(np.median(sides)), "max": float(sides.max())}
        out["smallest_angle_deg"] = _smallest_angle_deg(sides)
    if usable:
        mass = shape.mass
        euler = len(np.unique(f)) - len(Edges(f).count) + len(f)
        out["handles"] = (2 - euler) // 2
        out["volume_m3"], out["diameter_m"] = mass.volume_m3, shape.diameter_m
        out["principal_extents_m"] = np.ptp(v[np.unique(f)] @ mass.axes.T, axis=0).tolist()
        out["centre_m"] = mass.centre_m.tolist()
        out["moments_m5"] = mass.moments_m5.tolist()
        out["moment_ratios"] = (mass.moments_m5[:2] / mass.moments_m5[2]).tolist()
        out["axes"] = mass.axes.tolist()
        out["spin_tilt_deg"] = spin_tilt_deg(shape)
    out["usable"] = usable
    out["faults"] = [
        {"kind": x.kind, "message": x.message, "facets": list(x.facets), "lines": list(x.lines), "serious": x.serious}
        for x in faults
    ]
    out["sha256"] = shape.sha256
    return out


def _smallest_angle_deg(sides: np.ndarray) -> float:
    """By the law of cosines, of facets with sides (f, 3); 0 where a side is 0."""
    a, b, c = np.sort(sides, axis=1).T  # the smallest angle faces the shortest side
    with np.errstate(invalid="ignore", divide="ignore"):
        cosine = np.where(a > 0.0, (b**2 + c**2 - a**2) / (2.0 * b * c), 1.0)
    return float(np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0).max())))
