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
from smallbody.light import Horizons, horizons_of, mean_sunlight, no_shadows
from smallbody.push.arrays import OVER_SHOT, Table, arrays_of
from smallbody.push.gauss import ORBIT_UNITS, SPIN_UNITS
from smallbody.push.result import SOURCES, Acceleration, Checks, Drift, OrbitRates, Rate, SourceRates, SpinRates
from smallbody.push.solve import (
    Light,
    Seen,
    World,
    default_light_places,
    default_places,
    fewest_places,
    heat_of,
    light_of,
    turns_slowly,
    world_of,
)
from smallbody.push.sphere import SphereDrift, sphere_drift
from smallbody.shape import Shape, prepare_shape
from smallbody.workers import SILENT, Meter

FEWEST_STEPS = 10  # in a rotation, of a coarser repeat of the marching reference
WORTH_SAYING = 0.02  # relative numerical error beyond which the output says what to raise
SMALL_DRIFT = 3e-3  # of the natural scale: a drift smaller than this is judged against the scale
SMALL_SPIN = 2e-4


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


@dataclass(frozen=True)
class _Rates:
    """All rates, by source and in total; and the mean coefficients A1, A2, A3."""

    rates: Table
    coefficients: np.ndarray
    residual: float  # spin rate of the arriving light, rad/d2, which is nothing but the error of its shadows


def _rates(world: World, light: Light, lag: Seen) -> _Rates:
    """What one solution of light and heat makes of orbit and spin."""
    parts = {k: s.rates(world) for k, s in light.items()}
    late = lag.rates(world)
    out: Table = {
        "thermal": {k: parts["absorbed"][k] + late[k] for k in late},
        "scattered": parts["scattered"],
        "direct": parts["direct"],
    }
    # light that arrives makes no mean spin torque on any shape (Nesvorny & Vokrouhlicky 2008, A&A 480, 1): what the
    # sampling of shadows leaves of it is taken off, and counted as an error
    residual = parts["direct"]["domega_dt_rad_per_d2"]
    out["direct"] = parts["direct"] | {"domega_dt_rad_per_d2": 0.0}
    out["total"] = {k: sum(out[s][k] for s in SOURCES) for k in late}
    coefficients = sum((s.coefficients(world) for s in light.values()), lag.coefficients(world))
    return _Rates(out, np.asarray(coefficients), residual)


# How much of the change from a coarser repeat is taken for the error of the finer one. Shadow edges converge like
# noise. tests/bench/bench_errors.py measures how often that covers the truth.
LEFT_OF = {"rotation_nodes": 0.7, "orbit_places": 0.7, "lit_samples": 0.7}

Change = tuple[_Rates, _Rates, float]  # a solution, a coarser one, and how much of the change is taken for error


def _errors(fine: Table, changes: Mapping[str, list[Change]], residual: float) -> tuple[Table, dict[str, Table]]:
    """Numerical errors of all rates, and what each cause contributes; residual: the spin rate of arriving light."""
    by_cause: dict[str, Table] = {}
    for cause, pairs in changes.items():
        by_cause[cause] = {
            s: {
                k: float(np.sqrt(sum((w * (a.rates[s][k] - b.rates[s][k])) ** 2 for a, b, w in pairs))) for k in fine[s]
            }
            for s in fine
        }
    for s in ("direct", "total"):
        by_cause.setdefault("lit_samples", {t: dict.fromkeys(fine[t], 0.0) for t in fine})
        known = by_cause["lit_samples"][s]
        known["domega_dt_rad_per_d2"] = max(known["domega_dt_rad_per_d2"], abs(residual))
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
    return replace(result, notes=said + result.notes)


def _drift(body: Body, shape: Shape | None, horizons: Horizons | None, meter: Meter) -> Drift:
    clock = _Clock()
    solver, e = body.solver, body.orbit.e
    heat_places = solver.orbit_places or default_places(e)
    light_places = solver.light_places or default_light_places(e)
    steps = solver.march_steps if solver.method == "march" else 0
    fewer_steps = max(steps // 2, FEWEST_STEPS) if steps else 0
    two_clocks = not steps and not turns_slowly(body)
    if two_clocks and heat_places < (fewest := fewest_places(e)):
        raise BodyError(
            f"solver.orbit_places = {heat_places} is too few at orbit.e = {e:g}; from {fewest} on it will do"
        )
    if shape is None:
        shape = prepare_shape(body.shape)
    world = world_of(body, shape)
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

    light = light_of(world, horizons, light_places, meter)
    clock.lap("light")
    heat = heat_of(world, horizons, heat_places, meter, steps=steps, keep=True)
    clock.lap("heat")

    # What half the rotation nodes change, in the heat and in the light, what half the places change (at half the nodes:
    # it costs less and says the same), and what a quarter of the sample points change. Step by step there are no
    # places of the heat to halve.
    thin = horizons.thinned() if solver.shadows else no_shadows(shape, nodes // 2)
    heat_thin = heat_of(world, thin, heat_places, meter, steps=fewer_steps)
    heat_sparse = heat_of(world, thin, heat_places // 2, meter) if two_clocks else heat_thin
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
    errors, by_cause = _errors(fine, changes, first.residual)
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
        direct_spin_residual=first.residual / scale,
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
        arrays=arrays_of(world, horizons, light, heat, heat_thin, fine, errors),
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


def _spin_scale(world: World) -> float:
    """Natural scale of spin rates, rad/d2: mean sunlight/c times (diameter/2)^3 over the moment of inertia."""
    orbit = world.body.orbit
    return (
        mean_sunlight(orbit.a_au * AU_M, orbit.e) / C_M_S * (world.shape.diameter_m / 2) ** 3 / world.moment * DAY_S**2
    )


def _sphere(world: World) -> SphereDrift:
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
    world: World, nodes: int, heat_places: int, light_places: int, full: Mapping[str, float], meter: Meter, steps: int
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
    other = world_of(world.body, half)
    solver = world.body.solver
    horizons = horizons_of(half, nodes, solver.lit_samples, meter=meter) if solver.shadows else no_shadows(half, nodes)
    heat = heat_of(other, horizons, heat_places, meter, steps=steps)
    half_rates = _rates(other, light_of(other, horizons, light_places, meter).seen, heat.seen)
    return {k: abs(half_rates.rates["total"][k] - full[k]) for k in full}


def _source_rates(world: World, values: Mapping[str, float], errors: Mapping[str, float]) -> SourceRates:
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
    world: World,
    values: Mapping[str, float],
    by_cause: Mapping[str, Table],
    errors: Mapping[str, float],
    halved: Mapping[str, float],
) -> list[str]:
    """What to raise where a numerical error exceeds two per cent, and whether a denser shape would matter."""
    orbit = world.body.orbit
    spin_floor = SMALL_SPIN * _spin_scale(world)
    pressure = mean_sunlight(orbit.a_au * AU_M, orbit.e) / C_M_S
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
