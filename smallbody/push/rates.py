"""From a body to its mean rates of orbit and spin: the main road through body, shape, light, heat and push."""

from __future__ import annotations

import time
import warnings
from collections.abc import Mapping
from dataclasses import dataclass, replace
from importlib.metadata import PackageNotFoundError, version

import numpy as np

from smallbody.body import Body
from smallbody.constants import AU_M, C_M_S, DAY_S, GM_SUN, MYR_S
from smallbody.errors import BodyError, Note, ShapeError, SizeMismatch
from smallbody.heat import Ground, LagSolver
from smallbody.light import (
    Course,
    Horizons,
    LightSums,
    Places,
    SunOnBody,
    course,
    horizons_of,
    light_sums,
    no_shadows,
    places_between,
    places_in_true_anomaly,
    pole_vector,
    sun_on_body,
    whole_rotations,
)
from smallbody.light.course import NEAR_ENOUGH
from smallbody.push.gauss import ORBIT_UNITS, SPIN_UNITS, element_rates, mean_coefficients, spin_rates
from smallbody.push.recoil import HeatRun, Push, push_of_course, push_of_heat, push_of_light
from smallbody.push.result import SOURCES, Acceleration, Checks, Drift, OrbitRates, Rate, SourceRates, SpinRates
from smallbody.push.sphere import SphereDrift, sphere_drift
from smallbody.quantity import Quantity
from smallbody.shape import Shape, prepare_shape
from smallbody.workers import SILENT, Meter

SLOW_ROTATIONS = 50.0  # fewer in an orbit: rotation and orbit are one long period
WELL_MIXED = 24  # rotations of a long period in which any part of the body meets any part of the orbit
FEWEST_STEPS = 10  # in a rotation, of a coarser repeat of the marching reference
MOST_STEPS = 200_000  # of a long period, where only whole rotations ask for more than one orbit
QUICK_ROTATIONS = 2000.0  # fewer in an orbit: the days' change from place to place is followed as well
UPRIGHT = 0.5  # |cos obliquity| beyond which the Sun's longitude moves evenly enough to be followed; else none is
WORTH_SAYING = 0.02  # relative numerical error beyond which the output says what to raise
SMALL_DRIFT = 1e-3  # of the natural scale: a drift smaller than this is judged against the scale
SMALL_SPIN = 2e-4


@dataclass(frozen=True)
class _World:
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


def _world(body: Body, shape: Shape) -> _World:
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
    return _World(
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
class _Seen:
    """Pushes resolved along (radial, transverse, normal) and (spin, obliquity, azimuth) at places."""

    places: Places
    force: np.ndarray  # (p, 3) N
    torque: np.ndarray  # (p, 3) N m

    def rates(self, world: _World) -> dict[str, float]:
        orbit = world.body.orbit
        rates = element_rates(
            self.places, self.force / world.mass_kg, np.radians(orbit.i_deg), np.radians(orbit.peri_deg)
        )
        mean_torque = self.places.weight @ self.torque
        return rates | spin_rates(mean_torque, world.moment, world.omega, world.body.obliquity)

    def coefficients(self, world: _World) -> np.ndarray:
        return np.array(mean_coefficients(self.places, self.force / world.mass_kg))


def _resolve(push: Push, places: Places, world: _World) -> _Seen:
    return _Seen(
        places, np.einsum("pkx,px->pk", _radial_frame(places), push.force), push.torque @ world.pole_axes.T
    )  # fmt: skip


Light = Mapping[str, _Seen]  # what light pushes: absorbed, scattered, direct


@dataclass(frozen=True)
class _Light:
    """Light summed at places: what it pushes, what coarser sums would have said, and what it left behind."""

    seen: Light
    coarser: Mapping[str, Light]  # by the key of [solver] that would have to be smaller
    absorbed_w: float  # mean over the orbit, whole surface
    across_m2: float  # mean lit cross-section
    mean_absorbed_w_m2: np.ndarray  # (f,)


def _light(world: _World, horizons: Horizons, count: int, meter: Meter) -> _Light:
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
    return _Light(
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
class _Heat:
    """What the delay of the heat pushes, as the rates want it and (`drawn`) at the heat's places."""

    seen: _Seen
    drawn: _Seen
    run: HeatRun
    to_sun: np.ndarray  # (k, 3) towards the Sun, body frame, at the instants whose temperatures are kept
    turns: np.ndarray  # (k,) its body longitude then, in turns
    flux: np.ndarray  # (k,) sunlight then, W/m2

    @property
    def gained_w(self) -> float:
        """Mean power emitted beyond what is absorbed."""
        return float(self.seen.places.weight @ self.run.excess_w)


def _heat(world: _World, horizons: Horizons, count: int, meter: Meter, *, steps: int = 0, keep: bool = False) -> _Heat:
    """Solve the heat: on two clocks at `count` places, or step by step through whole orbits where that must be.

    steps : in a rotation, of the marching reference; 0 for the lag solver
    """
    orbit = world.body.orbit
    places = places_between(orbit.a_au * AU_M, orbit.e, count)
    if steps or world.body.rotations_per_orbit < SLOW_ROTATIONS:
        return _heat_on_course(world, horizons, places, meter, steps, keep)
    sun = world.sun(places)
    if abs(np.cos(world.body.obliquity)) >= UPRIGHT:
        rates, ahead = world.omega - sun.ascension_rate, np.zeros(len(places))
    else:
        rates, ahead = np.full(len(places), world.omega), sun.ascension
    quick = world.body.rotations_per_orbit >= QUICK_ROTATIONS
    solver = LagSolver(world.ground, places, horizons.columns, rates, None if quick else ahead)
    albedo = world.body.surface.bond_albedo
    run = push_of_heat(world.shape, horizons, solver, sun, albedo, shown=0 if keep else None, meter=meter)
    seen = _resolve(run.push, places, world)
    turns = -np.arange(horizons.columns) / horizons.columns
    flux = np.full(len(turns), places.flux_w_m2[0])
    return _Heat(seen, seen, run, _towards(sun.sin_latitude[0], turns), turns, flux)


def _towards(sin_latitude: np.ndarray | float, turns: np.ndarray) -> np.ndarray:
    cos_latitude = np.sqrt(np.maximum(0.0, 1 - np.square(sin_latitude)))
    angle = 2 * np.pi * turns
    z = np.broadcast_to(sin_latitude, turns.shape)
    return np.stack([cos_latitude * np.cos(angle), cos_latitude * np.sin(angle), z], axis=1)


def _heat_on_course(world: _World, horizons: Horizons, places: Places, meter: Meter, steps: int, keep: bool) -> _Heat:
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
    if keep and abs(rotations / orbits / exact - 1) > WORTH_SAYING / 2:
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
    return _Heat(seen, _Seen(places, force, torque), run, u, turns, way.places.flux_w_m2[kept])


def _lying(way: Course, turn: float) -> Course:
    """The same course over a body that lies turned by a part of a rotation."""
    c, s = np.cos(2 * np.pi * turn), np.sin(2 * np.pi * turn)
    return replace(
        way, turns=way.turns - turn, frame=np.array([[c, s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]]) @ way.frame
    )


WHERE_FROM = {
    "rotation_nodes": "the time nodes of a rotation",
    "orbit_places": "the places of the orbit",
    "lit_samples": "the edges of shadows",
}
RAISE = {
    "rotation_nodes": "raise solver.rotation_nodes",
    "orbit_places": "raise solver.orbit_places and solver.light_places",
    "lit_samples": "raise solver.lit_samples",
}
NO_MORE = "solver.lit_samples is at its most: the same surface cut into smaller facets would lower it"

Table = dict[str, dict[str, float]]  # source or "total" -> rate -> value


@dataclass(frozen=True)
class _Rates:
    """All rates, by source and in total; and the mean coefficients A1, A2, A3."""

    rates: Table
    coefficients: np.ndarray


def _rates(world: _World, light: Light, lag: _Seen) -> _Rates:
    """What one solution of light and heat makes of orbit and spin."""
    parts = {k: s.rates(world) for k, s in light.items()}
    late = lag.rates(world)
    out: Table = {
        "thermal": {k: parts["absorbed"][k] + late[k] for k in late},
        "scattered": parts["scattered"],
        "direct": parts["direct"],
    }
    out["total"] = {k: sum(out[s][k] for s in SOURCES) for k in late}
    coefficients = sum((s.coefficients(world) for s in light.values()), lag.coefficients(world))
    return _Rates(out, np.asarray(coefficients))


# Twice the nodes quarter the error of the heat, so a third of the change goes on to where no time step would be; that
# third is also taken for its error.
OVER_SHOT = 1 / 3
# How much of the change from a coarser repeat is taken for the error of the finer one. Shadow edges converge like
# noise. tests/bench/bench_errors.py measures how often that covers the truth.
LEFT_OF = {"rotation_nodes": 0.7, "orbit_places": 0.7, "lit_samples": 0.7}

Change = tuple[_Rates, _Rates, float]  # a solution, a coarser one, and how much of the change is taken for error


def _errors(fine: Table, changes: Mapping[str, list[Change]]) -> tuple[Table, dict[str, Table]]:
    """Numerical errors of all rates, and what each cause contributes."""
    by_cause: dict[str, Table] = {}
    for cause, pairs in changes.items():
        by_cause[cause] = {
            s: {
                k: float(np.sqrt(sum((w * (a.rates[s][k] - b.rates[s][k])) ** 2 for a, b, w in pairs))) for k in fine[s]
            }
            for s in fine
        }
    # arriving light makes no mean spin torque on any shape (Nesvorny & Vokrouhlicky 2008): what there is of it is error
    residual = abs(fine["direct"]["domega_dt_rad_per_d2"])
    for s in ("direct", "total"):
        by_cause.setdefault("lit_samples", {t: dict.fromkeys(fine[t], 0.0) for t in fine})
        known = by_cause["lit_samples"][s]
        known["domega_dt_rad_per_d2"] = max(known["domega_dt_rad_per_d2"], residual)
    total = {s: {k: float(np.sqrt(sum(t[s][k] ** 2 for t in by_cause.values()))) for k in fine[s]} for s in fine}
    return total, by_cause


def drift(body: Body, *, shape: Shape | None = None, horizons: Horizons | None = None, meter: Meter = SILENT) -> Drift:
    """Mean rates at which sunlight changes the orbit and spin of a body, by source, each with its numerical error.

    body : Body
    shape : Shape already prepared (centre of mass at the origin, z the spin axis); else it is made from body.shape
    horizons : of that shape, with body.solver.rotation_nodes meridians; else they are tabulated
    meter : told of progress
    returns : Drift
    raises : ShapeError; SizeMismatch, if horizons do not fit; NotSettled
    source : pressure of light and Lambert recoil; 1-D heat conduction below each facet; Gauss's equations; rotation
        about a principal axis. Heat radiated by one facet onto another is not followed.
    """
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always", Note)
        result = _drift(body, shape, horizons, meter)
    for w in caught:
        warnings.warn_explicit(w.message, w.category, w.filename, w.lineno)
    said = tuple(str(w.message) for w in caught if issubclass(w.category, Note))
    return _with_notes(result, said)


def _with_notes(result: Drift, said: tuple[str, ...]) -> Drift:
    return replace(result, notes=said + result.notes)


def _drift(body: Body, shape: Shape | None, horizons: Horizons | None, meter: Meter) -> Drift:
    clock = _Clock()
    solver, e = body.solver, body.orbit.e
    heat_places = solver.orbit_places or default_places(e)
    light_places = solver.light_places or default_light_places(e)
    steps = solver.march_steps if solver.method == "march" else 0
    fewer_steps = max(steps // 2, FEWEST_STEPS) if steps else 0
    two_clocks = not steps and body.rotations_per_orbit >= SLOW_ROTATIONS
    if two_clocks and heat_places < (fewest := fewest_places(e)):
        raise BodyError(
            f"solver.orbit_places = {heat_places} is too few at orbit.e = {e:g}; from {fewest} on it will do"
        )
    if shape is None:
        shape = prepare_shape(body.shape)
    world = _world(body, shape)
    clock.lap("shape")
    nodes = solver.rotation_nodes
    if not solver.shadows:
        horizons = no_shadows(shape, nodes)
    elif horizons is None:
        horizons = horizons_of(shape, nodes, solver.lit_samples, meter=meter)
    elif horizons.columns != nodes or len(horizons.rows) != len(shape.facets):
        raise SizeMismatch(
            f"horizons of {len(horizons.rows)} facets and {horizons.columns} meridians for a shape of "
            f"{len(shape.facets)} facets and {nodes} rotation nodes"
        )
    if len(horizons.shifts) == 1 and horizons.overshadowed.any():
        warnings.warn(
            "with solver.lit_samples = 1 the numerical errors do not know the error at the edges of shadows",
            Note, stacklevel=2,
        )  # fmt: skip
    clock.lap("horizons")

    light = _light(world, horizons, light_places, meter)
    clock.lap("light")
    heat = _heat(world, horizons, heat_places, meter, steps=steps, keep=True)
    clock.lap("heat")

    # What half the rotation nodes change, in the heat and in the light, what half the places change (at half the nodes:
    # it costs less and says the same), and what a quarter of the sample points change. Step by step there are no
    # places of the heat to halve.
    thin = horizons.thinned() if solver.shadows else no_shadows(shape, nodes // 2)
    heat_thin = _heat(world, thin, heat_places, meter, steps=fewer_steps)
    heat_sparse = _heat(world, thin, heat_places // 2, meter) if two_clocks else heat_thin
    first = _rates(world, light.seen, heat.seen)
    slower = _rates(world, light.seen, heat_thin.seen)
    fewer = _rates(world, light.coarser["rotation_nodes"], heat_thin.seen)
    sparser = _rates(world, light.coarser["orbit_places"], heat_sparse.seen)
    changes = {
        "rotation_nodes": [(first, slower, OVER_SHOT), (slower, fewer, LEFT_OF["rotation_nodes"])],
        "orbit_places": [(slower, sparser, LEFT_OF["orbit_places"])],
    }
    if len(horizons.shifts) > 1 and horizons.overshadowed.any():
        shadier = _rates(world, light.coarser["lit_samples"], heat.seen)
        changes["lit_samples"] = [(first, shadier, LEFT_OF["lit_samples"])]
    # the heat is of second order in the time step: two solutions tell where the third, with no step at all, would be
    fine = {s: {k: v + OVER_SHOT * (v - slower.rates[s][k]) for k, v in first.rates[s].items()} for s in first.rates}
    coefficients = first.coefficients + OVER_SHOT * (first.coefficients - slower.coefficients)
    errors, by_cause = _errors(fine, changes)
    left = np.sqrt(
        sum(
            (left_of * (one.coefficients - other.coefficients)) ** 2
            for pairs in changes.values()
            for one, other, left_of in pairs
        )
    )
    clock.lap("coarser repeats")

    halved: dict[str, float] = {}
    if solver.halved_shape:
        halved = _halved(world, nodes // 2, heat_places, light_places, fewer.rates["total"], meter, fewer_steps)
        clock.lap("halved shape")

    scale = _spin_scale(world)
    checks = Checks(
        energy_balance=heat.gained_w / light.absorbed_w if light.absorbed_w else 0.0,
        facets=len(shape.facets),
        overshadowed_fraction=horizons.overshadowed_fraction,
        rotations_per_orbit=body.rotations_per_orbit,
        direct_spin_residual=fine["direct"]["domega_dt_rad_per_d2"] / scale,
        spin_scale_rad_per_d2=scale,
        sphere_da_dt_au_per_myr=(line := _sphere(world)).da_dt_au_per_myr,
        halved_shape=halved,
    )
    a1, a2, a3 = (float(x) for x in coefficients)
    acceleration = Acceleration(
        a1_au_per_d2=a1,
        a2_au_per_d2=a2,
        a3_au_per_d2=a3,
        area_to_mass_m2_per_kg=light.across_m2 / world.mass_kg,
        beta=a1 * AU_M**3 / DAY_S**2 / GM_SUN,
        numerical_error=dict(zip(("a1_au_per_d2", "a2_au_per_d2", "a3_au_per_d2"), map(float, left))),
    )
    by_source = {s: _source_rates(world, fine[s], errors[s]) for s in SOURCES}
    total = _source_rates(world, fine["total"], errors["total"])
    return Drift(
        name=body.name,
        orbit=total.orbit,
        spin=total.spin,
        by_source=by_source,
        acceleration=acceleration,
        checks=checks,
        provenance={
            "body": body.to_dict(),
            "shape_sha256": shape.sha256,
            "solver": {
                "method": solver.method,
                "rotation_nodes": nodes,
                "orbit_places": heat_places,
                "light_places": light_places,
                "lit_samples": len(horizons.shifts),
                "shadows": solver.shadows,
            },
            "mass_kg": world.mass_kg,
            "diameter_km": shape.diameter_m / 1000,
            "moment_of_inertia_kg_m2": world.moment,
            "versions": versions(),
            "seconds": clock.laps,
        },
        sphere=line,
        notes=tuple(_advice(world, fine["total"], by_cause, errors["total"], halved)),
        arrays=_arrays(world, horizons, light, heat, heat_thin, fine, errors),
    )


class _Clock:
    """Seconds spent, by task."""

    def __init__(self) -> None:
        self.laps: dict[str, float] = {}
        self._last = time.perf_counter()

    def lap(self, task: str) -> None:
        now = time.perf_counter()
        self.laps[task] = round(now - self._last, 3)
        self._last = now


def versions() -> dict[str, str]:
    """Versions of what computed the result."""
    found = {}
    for name in ("smallbody", "numpy", "scipy", "numba"):
        try:
            found[name] = version(name)
        except PackageNotFoundError:  # run from a folder that was never installed
            found[name] = "unknown"
    return found


def _spin_scale(world: _World) -> float:
    """Natural scale of spin rates, rad/d2: mean sunlight/c times (diameter/2)^3 over the moment of inertia."""
    orbit = world.body.orbit
    places = places_in_true_anomaly(orbit.a_au * AU_M, orbit.e, 8)
    flux = float(places.weight @ places.flux_w_m2)
    return flux / C_M_S * (world.shape.diameter_m / 2) ** 3 / world.moment * DAY_S**2


def _sphere(world: _World) -> SphereDrift:
    b = world.body
    volume = world.shape.mass.volume_m3
    return sphere_drift(
        radius_m=world.shape.diameter_m / 2,
        density_kg_m3=world.mass_kg / volume,
        bond_albedo=b.surface.bond_albedo,
        emissivity=b.surface.emissivity,
        thermal_inertia=b.surface.thermal_inertia,
        period_h=b.spin.period_h,
        obliquity_deg=float(np.degrees(b.obliquity)),
        a_au=b.orbit.a_au,
        e=b.orbit.e,
    )


def _halved(
    world: _World, nodes: int, heat_places: int, light_places: int, full: Mapping[str, float], meter: Meter, steps: int
) -> dict[str, float]:
    """How far each rate moves when the shape has half the facets, all else equal (at half the rotation nodes).

    Empty, with a note, where half the facets make no usable shape.
    """
    try:
        half = world.shape.halved()
    except ShapeError as error:
        warnings.warn(f"whether a denser shape would matter is not known: {error}", Note, stacklevel=2)
        return {}
    if world.body.shape.diameter_km is not None:
        half = half.scaled(world.shape.diameter_m / half.diameter_m)
    half = half.moved(-half.mass.centre_m)
    other = _world(world.body, half)
    solver = world.body.solver
    horizons = horizons_of(half, nodes, solver.lit_samples, meter=meter) if solver.shadows else no_shadows(half, nodes)
    heat = _heat(other, horizons, heat_places, meter, steps=steps)
    half_rates = _rates(other, _light(other, horizons, light_places, meter).seen, heat.seen)
    return {k: abs(half_rates.rates["total"][k] - full[k]) for k in full}


def _source_rates(world: _World, values: Mapping[str, float], errors: Mapping[str, float]) -> SourceRates:
    def rate(key: str) -> Rate:
        return Rate(float(values[key]), float(errors[key]))

    spin_up = rate("domega_dt_rad_per_d2")
    if spin_up.value:
        years = world.omega / (abs(spin_up.value) / DAY_S**2) / MYR_S
        doubling = Rate(years, years * spin_up.relative_error)
    else:
        doubling = Rate(np.inf, np.inf)
    return SourceRates(
        OrbitRates(**{k: rate(k) for k in ORBIT_UNITS}),
        SpinRates(**{k: rate(k) for k in SPIN_UNITS}, doubling_time_myr=doubling),
    )


def _advice(
    world: _World,
    values: Mapping[str, float],
    by_cause: Mapping[str, Table],
    errors: Mapping[str, float],
    halved: Mapping[str, float],
) -> list[str]:
    """What to raise where a numerical error exceeds two per cent, and whether a denser shape would matter."""
    orbit = world.body.orbit
    spin_floor = SMALL_SPIN * _spin_scale(world)
    pressure = 3 * _spin_scale(world) / DAY_S**2 * world.moment / ((world.shape.diameter_m / 2) ** 3)
    accel = pressure * np.pi * (world.shape.diameter_m / 2) ** 2 / world.mass_kg
    n = np.sqrt(GM_SUN / (orbit.a_au * AU_M) ** 3)
    to_deg = DAY_S**-2 / world.omega * np.degrees(1) * MYR_S
    floors = {
        "da_dt_au_per_myr": SMALL_DRIFT * 2 * accel / n / AU_M * MYR_S,
        "domega_dt_rad_per_d2": spin_floor,
        "dobliquity_dt_deg_per_myr": spin_floor * to_deg,
    }
    said = []
    for key, floor in floors.items():
        size = max(abs(values[key]), floor)
        if errors[key] > WORTH_SAYING * size:
            cause = max(by_cause, key=lambda c: by_cause[c]["total"][key])
            said.append(
                f"{key}: numerical error is {100 * errors[key] / size:.1f} %, most of it from {WHERE_FROM[cause]}; "
                + (NO_MORE if cause == "lit_samples" and world.body.solver.lit_samples == 16 else RAISE[cause])
            )
    for key, floor in floors.items():
        size = max(abs(values[key]), floor)
        if halved and halved[key] > WORTH_SAYING * size:
            said.append(
                f"{key}: with half the facets it moves by {100 * halved[key] / size:.1f} %; a denser shape would matter"
            )
    return said


def _arrays(
    world: _World, horizons: Horizons, light: _Light, heat: _Heat, thin: _Heat, fine: Table, errors: Table
) -> dict[str, Quantity]:
    shape = world.shape
    places = light.seen["direct"].places
    sun = world.sun(places)
    first = heat.drawn.places
    turns, u = heat.turns, heat.to_sun
    strength = heat.flux * (1 - world.body.surface.bond_albedo)
    absorbed = np.empty((len(shape.facets), len(u)), np.float32)
    for start in range(0, len(u), 16):
        part = slice(start, start + 16)
        absorbed[:, part] = np.maximum(0.0, shape.normals @ u[part].T) * horizons.sees(u[part]) * strength[part]
    # the delay of the heat is solved at fewer places: its push is carried to the light's places by a periodic spline
    late = _between(heat.drawn, thin.drawn, places)
    force = {
        "thermal": light.seen["absorbed"].force + late[0],
        "scattered": light.seen["scattered"].force,
        "direct": light.seen["direct"].force,
    }
    torque = {
        "thermal": light.seen["absorbed"].torque + late[1],
        "scattered": light.seen["scattered"].torque,
        "direct": light.seen["direct"].torque,
    }
    names = list(fine["total"])
    sources = ("total", *SOURCES)

    def text(values: tuple[str, ...] | list[str], dim: str, about: str) -> Quantity:
        return Quantity(np.array(values, dtype=object), (dim,), "", about)

    def table(of: Table) -> np.ndarray:
        return np.array([[of[s][k] for k in names] for s in sources])

    return {
        "source": text(SOURCES, "source", "cause of the push"),
        "source_total": text(sources, "source_total", "cause of the rate, or all together"),
        "rate": text(names, "rate", "name of the rate; it ends in its unit"),
        "orbit_axis": text(("radial", "transverse", "normal"), "orbit_axis", "direction in the orbit"),
        "pole_axis": text(("spin", "obliquity", "azimuth"), "pole_axis", "along the pole, towards larger angles of it"),
        "rate_value": Quantity(table(fine), ("source_total", "rate"), "1", "mean rates, units in their names"),
        "rate_error": Quantity(table(errors), ("source_total", "rate"), "1", "numerical errors of the rates"),
        "vertex_m": Quantity(shape.vertices_m, ("vertex", "axis"), "m", "corners, z is the spin axis"),
        "facet_vertex": Quantity(shape.facets.astype(np.int32), ("facet", "corner"), "1", "corners of each facet"),
        "facet_area_m2": Quantity(shape.areas_m2, ("facet",), "m2", "area"),
        "facet_overshadowed": Quantity(
            horizons.overshadowed.astype(np.int8), ("facet",), "1", "something rises over the facet's own plane"
        ),
        "subsolar_longitude_deg": Quantity(
            np.degrees(np.unwrap(2 * np.pi * turns)), ("rotation",), "deg", "body longitude of the Sun, in time order"
        ),
        "facet_absorbed_w_m2": Quantity(absorbed, ("facet", "rotation"), "W/m2", "absorbed sunlight at perihelion"),
        "facet_temperature_k": Quantity(
            heat.run.temperature_k, ("facet", "rotation"), "K", "surface temperature at perihelion"
        ),
        "facet_mean_absorbed_w_m2": Quantity(
            light.mean_absorbed_w_m2, ("facet",), "W/m2", "absorbed sunlight, mean over the orbit"
        ),
        "facet_mean_temperature_k": Quantity(
            heat.run.mean_temperature_k, ("facet", "heat_place"), "K", "surface temperature, mean over a rotation"
        ),
        "heat_place_mean_anomaly_deg": Quantity(
            np.degrees(first.mean_anomaly), ("heat_place",), "deg", "where heat was solved"
        ),
        "place_mean_anomaly_deg": Quantity(
            np.degrees(places.mean_anomaly), ("place",), "deg", "where light was summed"
        ),
        "place_true_anomaly_deg": Quantity(np.degrees(places.true_anomaly), ("place",), "deg", "true anomaly"),
        "place_sun_distance_au": Quantity(places.distance_m / AU_M, ("place",), "au", "distance from the Sun"),
        "place_subsolar_latitude_deg": Quantity(
            np.degrees(np.arcsin(sun.sin_latitude)), ("place",), "deg", "body latitude of the Sun"
        ),
        "place_weight": Quantity(places.weight, ("place",), "1", "share of the orbital period"),
        "force_n": Quantity(
            np.stack([force[s] for s in SOURCES]), ("source", "place", "orbit_axis"), "N", "mean over a rotation"
        ),
        "torque_n_m": Quantity(
            np.stack([torque[s] for s in SOURCES]), ("source", "place", "pole_axis"), "N m", "mean over a rotation"
        ),
    }  # fmt: skip


def _between(lag: _Seen, coarser: _Seen, places: Places) -> tuple[np.ndarray, np.ndarray]:
    """Force and torque of the heat's delay, without its error of second order, at other places."""
    from scipy.interpolate import CubicSpline

    m = np.append(lag.places.mean_anomaly, lag.places.mean_anomaly[0] + 2 * np.pi)

    def carry(x: np.ndarray, thin: np.ndarray) -> np.ndarray:
        x = x + OVER_SHOT * (x - thin)
        spline = CubicSpline(m, np.concatenate([x, x[:1]]), bc_type="periodic")
        return np.asarray(spline(m[0] + np.mod(places.mean_anomaly - m[0], 2 * np.pi)))

    return carry(lag.force, coarser.force), carry(lag.torque, coarser.torque)
