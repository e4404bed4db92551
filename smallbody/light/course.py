"""The Sun over a body step by step: for bodies that turn slowly, and for marching through whole orbits."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from smallbody.constants import GM_SUN
from smallbody.light.horizons import Horizons
from smallbody.light.sun import Places, places_at, pole_vector
from smallbody.shape import Shape

MOST_ORBITS = 4  # whole orbits that may make one long period
NEAR_ENOUGH = 2e-3  # relative change of the rotation rate that is let pass so that a long period holds whole rotations


@dataclass(frozen=True)
class Course:
    """Equal steps of time through whole orbits that hold a whole number of rotations.

    places : Places of all n steps
    orbits, rotations : in the period
    period_s : of all of it
    sin_latitude, turns : (n,) the Sun on the body's sky; longitude in turns
    frame : (n, 3, 3) rows: the body's x, y, z axes in the orbit frame
    """

    places: Places
    orbits: int
    rotations: int
    period_s: float
    sin_latitude: np.ndarray
    turns: np.ndarray
    frame: np.ndarray

    @property
    def rate(self) -> float:
        """Rotation rate, rad/s."""
        return 2 * np.pi * self.rotations / self.period_s


def whole_rotations(rotations_per_orbit: float, most_orbits: int = MOST_ORBITS) -> tuple[int, int]:
    """Orbits and rotations of the shortest period that holds whole numbers of both, nearly: see NEAR_ENOUGH."""
    best = Fraction(max(1, round(rotations_per_orbit)), 1)
    for orbits in range(1, most_orbits + 1):
        turns = max(1, round(rotations_per_orbit * orbits))
        one = Fraction(turns, orbits)
        if abs(float(one) - rotations_per_orbit) < abs(float(best) - rotations_per_orbit):
            best = one
        if abs(float(best) / rotations_per_orbit - 1) < NEAR_ENOUGH:
            break
    return best.denominator, best.numerator


def course(a_m: float, e: float, obliquity: float, azimuth: float, orbits: int, rotations: int, steps: int) -> Course:
    """The Sun's course over a body through `orbits` orbits and `rotations` rotations in `steps` equal steps of time."""
    share = np.arange(steps) / steps
    places = places_at(a_m, e, 2 * np.pi * orbits * share, np.full(steps, 1.0 / steps))
    z = pole_vector(obliquity, azimuth)
    x0 = np.array([1.0, 0.0, 0.0]) - z[0] * z
    if np.linalg.norm(x0) < 0.1:
        x0 = np.array([0.0, 1.0, 0.0]) - z[1] * z
    x0 /= np.linalg.norm(x0)
    y0 = np.cross(z, x0)
    angle = 2 * np.pi * np.mod(rotations * share, 1.0)
    c, s = np.cos(angle)[:, None], np.sin(angle)[:, None]
    frame = np.stack([c * x0 + s * y0, -s * x0 + c * y0, np.broadcast_to(z, (steps, 3))], axis=1)
    u = np.einsum("nkx,nx->nk", frame, places.to_sun)
    return Course(
        places=places,
        orbits=orbits,
        rotations=rotations,
        period_s=orbits * 2 * np.pi / np.sqrt(GM_SUN / a_m**3),
        sin_latitude=np.clip(u[:, 2], -1.0, 1.0),
        turns=np.arctan2(u[:, 1], u[:, 0]) / (2 * np.pi),
        frame=frame,
    )


def lit_on_course(shape: Shape, horizons: Horizons, way: Course, facets: np.ndarray) -> np.ndarray:
    """mu of some facets at every step, (n, L); facets (L,) indices. Each sample asks its nearest meridian."""
    from smallbody.light._sunlight import _lit_steps

    out = np.empty((len(way.turns), len(facets)))
    cos_latitude = np.sqrt(np.maximum(0.0, 1 - way.sin_latitude**2))
    _lit_steps(
        facets, shape.normals, horizons.rows, horizons.starts, horizons.low, horizons.high, horizons.shifts,
        horizons.columns, way.sin_latitude, cos_latitude, way.turns, out,
    )  # fmt: skip
    return out
