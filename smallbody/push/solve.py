"""Light and heat of one body, solved at some fineness: what they push, resolved along the orbit and the pole."""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from smallbody.body import Body
from smallbody.constants import AU_M
from smallbody.errors import Note
from smallbody.heat import Ground, LagSolver
from smallbody.light import (
    Course,
    Horizons,
    LightSums,
    Places,
    SunOnBody,
    course,
    light_sums,
    places_between,
    places_in_true_anomaly,
    pole_vector,
    sun_on_body,
    whole_rotations,
)
from smallbody.light.course import NEAR_ENOUGH
from smallbody.push.gauss import element_rates, mean_coefficients, spin_rates
from smallbody.push.recoil import HeatRun, Push, push_of_course, push_of_heat, push_of_light
from smallbody.shape import Shape
from smallbody.workers import Meter

SLOW_ROTATIONS = 50.0  # fewer in an orbit: rotation and orbit are one long period
WELL_MIXED = 24  # rotations of a long period in which any part of the body meets any part of the orbit
MOST_STEPS = 200_000  # of a long period, where only whole rotations ask for more than one orbit
QUICK_ROTATIONS = 2000.0  # fewer in an orbit: the days' change from place to place is followed as well
UPRIGHT = 0.5  # |cos obliquity| beyond which the Sun's longitude moves evenly enough to be followed; else none is
ROUGH = 1e-3  # share of a facet's temperature: settled worse than this is worth a note
MISSED = 0.01  # a period whose rotations are off by more than this is worth a note


@dataclass(frozen=True)
class World:
    """Body, shape and pole, ready to be asked at any fineness."""

    body: Body
    shape: Shape
    mass_kg: float
    moment: float  # about the spin axis, kg m2
    omega: float
    pole_axes: np.ndarray  # rows: pole, towards increasing obliquity, towards increasing azimuth; orbit frame
    ground: Ground

    def sun(self, places: Places) -> SunOnBody:
        return sun_on_body(places, self.body.obliquity, self.body.pole_azimuth)


def world_of(body: Body, shape: Shape) -> World:
    mass = shape.mass
    density = (
        body.bulk.density_kg_m3 if body.bulk.density_kg_m3 is not None else (body.bulk.mass_kg or 0.0) / mass.volume_m3
    )
    tilt, turn = body.obliquity, body.pole_azimuth
    axes = np.array(
        [
            pole_vector(tilt, turn),
            [np.cos(tilt) * np.cos(turn), np.cos(tilt) * np.sin(turn), -np.sin(tilt)],
            [-np.sin(turn), np.cos(turn), 0.0],
        ]
    )
    return World(
        body=body,
        shape=shape,
        mass_kg=density * mass.volume_m3,
        moment=density * float(mass.inertia_m5[2, 2]),
        omega=body.spin.rate,
        pole_axes=axes,
        ground=Ground(body.surface.emissivity, body.surface.thermal_inertia),
    )


def default_places(e: float) -> int:
    """Places of the orbit at which heat is solved, unless asked otherwise: more on eccentric orbits."""
    return 24 if e < 0.3 else 32 if e < 0.6 else 48 if e < 0.8 else 96


def fewest_places(e: float) -> int:
    """Fewer places of the heat than this, halved for the error, stand too far apart for a spline of the daily means."""
    return 8 if e < 0.65 else 10 if e < 0.9 else 24


def default_light_places(e: float) -> int:
    """Places of the orbit at which light is summed, unless asked otherwise."""
    return 192 if e < 0.6 else 384


def _radial_frame(places: Places) -> np.ndarray:
    """(p, 3, 3) rows radial, transverse, normal, in the orbit frame."""
    normal = np.broadcast_to([0.0, 0.0, 1.0], places.to_sun.shape)
    radial = -places.to_sun
    return np.stack([radial, np.cross(normal, radial), normal], axis=1)


@dataclass(frozen=True)
class Seen:
    """Pushes resolved along (radial, transverse, normal) and (spin, obliquity, azimuth) at places."""

    places: Places
    force: np.ndarray  # (p, 3) N
    torque: np.ndarray  # (p, 3) N m

    def rates(self, world: World) -> dict[str, float]:
        orbit = world.body.orbit
        rates = element_rates(
            self.places, self.force / world.mass_kg, np.radians(orbit.i_deg), np.radians(orbit.peri_deg)
        )
        mean_torque = self.places.weight @ self.torque
        return rates | spin_rates(mean_torque, world.moment, world.omega, world.body.obliquity)

    def coefficients(self, world: World) -> np.ndarray:
        return np.array(mean_coefficients(self.places, self.force / world.mass_kg))


def _resolve(push: Push, places: Places, world: World) -> Seen:
    return Seen(
        places, np.einsum("pkx,px->pk", _radial_frame(places), push.force), push.torque @ world.pole_axes.T
    )  # fmt: skip


Light = Mapping[str, Seen]  # what light pushes: absorbed, scattered, direct


@dataclass(frozen=True)
class LightPush:
    """Light summed at places: what it pushes, what coarser sums would have said, and what it left behind."""

    seen: Light
    coarser: Mapping[str, Light]  # by the key of [solver] that would have to be smaller
    absorbed_w: float  # mean over the orbit, whole surface
    across_m2: float  # mean lit cross-section
    mean_absorbed_w_m2: np.ndarray  # (f,)


def light_of(world: World, horizons: Horizons, count: int, meter: Meter) -> LightPush:
    orbit = world.body.orbit
    albedo = world.body.surface.bond_albedo

    def seen(sums: LightSums, places: Places) -> Light:
        pushes = push_of_light(sums, places, world.sun(places), albedo)
        return {k: _resolve(v, places, world) for k, v in pushes.items()}

    count += count % 2
    places = places_in_true_anomaly(orbit.a_au * AU_M, orbit.e, count)
    # light received goes as 1/r^2: these weights make the mean cosine that of the light, not of the time
    light = places.weight * places.flux_w_m2
    table = light_sums(world.shape, horizons, world.sun(places), light / light.sum(), meter=meter)
    half = places_in_true_anomaly(orbit.a_au * AU_M, orbit.e, count // 2)
    absorbed = (1 - albedo) * light.sum() * table.fine.mean_cosine
    return LightPush(
        seen=seen(table.fine, places),
        coarser={
            "rotation_nodes": seen(table.fewer_meridians, places),
            "orbit_places": seen(table.fine.every_second_place(), half),
            "lit_samples": seen(table.fewer_samples, places),
        },
        absorbed_w=float(absorbed @ world.shape.areas_m2),
        across_m2=float(places.weight @ table.fine.across),
        mean_absorbed_w_m2=absorbed,
    )


@dataclass(frozen=True)
class HeatPush:
    """What the delay of the heat pushes, as the rates want it and (`drawn`) at the heat's places."""

    seen: Seen
    drawn: Seen
    run: HeatRun
    to_sun: np.ndarray  # (k, 3) towards the Sun, body frame, at the instants whose temperatures are kept
    turns: np.ndarray  # (k,) its body longitude then, in turns
    flux: np.ndarray  # (k,) sunlight then, W/m2

    @property
    def gained_w(self) -> float:
        """Mean power emitted beyond what is absorbed."""
        return float(self.seen.places.weight @ self.run.excess_w)


def turns_slowly(body: Body) -> bool:
    """Are rotation and orbit one long period?"""
    return body.rotations_per_orbit < SLOW_ROTATIONS


def heat_of(
    world: World, horizons: Horizons, count: int, meter: Meter, *, steps: int = 0, keep: bool = False
) -> HeatPush:
    """Solve the heat: on two clocks at `count` places, or step by step through whole orbits where that must be.

    steps : in a rotation, of the marching reference; 0 for the lag solver
    """
    orbit = world.body.orbit
    places = places_between(orbit.a_au * AU_M, orbit.e, count)
    if steps or turns_slowly(world.body):
        return heat_on_course(world, horizons, places, meter, steps, keep)
    sun = world.sun(places)
    if abs(np.cos(world.body.obliquity)) >= UPRIGHT:
        rates, ahead = world.omega - sun.ascension_rate, np.zeros(len(places))
    else:
        rates, ahead = np.full(len(places), world.omega), sun.ascension
    quick = world.body.rotations_per_orbit >= QUICK_ROTATIONS
    solver = LagSolver(world.ground, places, horizons.columns, rates, None if quick else ahead)
    albedo = world.body.surface.bond_albedo
    run = push_of_heat(world.shape, horizons, solver, sun, albedo, shown=0 if keep else None, meter=meter)
    if keep and solver.roughest > ROUGH:
        warnings.warn(
            f"the temperature of some facet is settled to {100 * solver.roughest:.1g} % only: its nights give up heat "
            "faster than places so far apart can follow; more solver.orbit_places may help", Note, stacklevel=2,
        )  # fmt: skip
    seen = _resolve(run.push, places, world)
    turns = -np.arange(horizons.columns) / horizons.columns
    flux = np.full(len(turns), places.flux_w_m2[0])
    return HeatPush(seen, seen, run, _towards(sun.sin_latitude[0], turns), turns, flux)


def _towards(sin_latitude: np.ndarray | float, turns: np.ndarray) -> np.ndarray:
    cos_latitude = np.sqrt(np.maximum(0.0, 1 - np.square(sin_latitude)))
    angle = 2 * np.pi * turns
    z = np.broadcast_to(sin_latitude, turns.shape)
    return np.stack([cos_latitude * np.cos(angle), cos_latitude * np.sin(angle), z], axis=1)


def heat_on_course(world: World, horizons: Horizons, places: Places, meter: Meter, steps: int, keep: bool) -> HeatPush:
    orbit, nodes, exact = world.body.orbit, horizons.columns, world.body.rotations_per_orbit
    # which place a step is nearest to
    m = places.mean_anomaly
    middle = 0.5 * (m + np.append(m[1:], m[0] + 2 * np.pi))
    # perihelion is passed quickly, and every place wants a step of its own; a coarser repeat has half of all that
    a_step_each = 2 * np.pi / np.diff(middle).min()
    least = max(nodes * np.sqrt(1 + orbit.e) / (1 - orbit.e) ** 1.5, a_step_each if keep else a_step_each / 2)
    # so many orbits hold whole rotations to NEAR_ENOUGH (Dirichlet's theorem), if the steps are not too many
    orbits, rotations = whole_rotations(exact, int(min(np.sqrt(1 / (NEAR_ENOUGH * exact)) + 1, MOST_STEPS // least)))
    n = max((steps or nodes) * rotations, int(orbits * least) + 1)
    if keep and abs(rotations / orbits / exact - 1) > MISSED:
        warnings.warn(
            f"heat is solved for {rotations} rotations in {orbits} orbits, not {exact * orbits:.4g}", Note,
            stacklevel=2,
        )  # fmt: skip
    way = course(places.a_m, orbit.e, world.body.obliquity, world.body.pole_azimuth, orbits, rotations, n)
    bins = np.searchsorted(middle, np.mod(way.places.mean_anomaly, 2 * np.pi)) % len(m)
    shown = np.round(np.arange(nodes) * n / (nodes * rotations)).astype(int) % n if keep else None
    # how the body lies at perihelion is not known and does not last: where it matters, mean over some ways of lying
    lies = int(np.ceil(WELL_MIXED / rotations))
    runs = [
        push_of_course(
            world.shape, horizons, _lying(way, k / (lies * orbits)), world.ground, world.body.surface.bond_albedo, bins,
            march=steps > 0, shown=shown if k == 0 else None, meter=meter,
        )
        for k in range(lies)
    ]  # fmt: skip
    push = Push(*(np.mean([getattr(r.push, x) for r in runs], axis=0) for x in ("force", "torque")))
    run = replace(runs[0], push=push, excess_w=np.mean([r.excess_w for r in runs], axis=0))
    seen = _resolve(run.push, way.places, world)
    per = np.bincount(bins, minlength=len(m))[:, None]
    force, torque = (
        np.stack([np.bincount(bins, x[:, k], minlength=len(m)) for k in range(3)], axis=1) / np.maximum(per, 1)
        for x in (seen.force, seen.torque)
    )
    without, nearest = per[:, 0] == 0, np.round(m / (2 * np.pi) * n / orbits).astype(int) % n
    force[without], torque[without] = seen.force[nearest[without]], seen.torque[nearest[without]]
    kept = shown if shown is not None else np.empty(0, int)
    turns = way.turns[kept]
    u = _towards(way.sin_latitude[kept], turns)
    return HeatPush(seen, Seen(places, force, torque), run, u, turns, way.places.flux_w_m2[kept])


def _lying(way: Course, turn: float) -> Course:
    """The same course over a body that lies turned by a part of a rotation."""
    c, s = np.cos(2 * np.pi * turn), np.sin(2 * np.pi * turn)
    return replace(
        way, turns=way.turns - turn, frame=np.array([[c, s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]]) @ way.frame
    )
