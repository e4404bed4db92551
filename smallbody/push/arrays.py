"""What a run hands to the archive and to pictures: arrays with named axes."""

from __future__ import annotations

import numpy as np

from smallbody.constants import AU_M
from smallbody.light import Horizons, Places
from smallbody.push.result import SOURCES
from smallbody.push.solve import HeatPush, LightPush, Seen, World
from smallbody.quantity import Quantity

Table = dict[str, dict[str, float]]  # source or "total" -> rate -> value
# Twice the nodes quarter the error of the heat, so a third of the change goes on to where no time step would be; that
# third is also taken for its error.
OVER_SHOT = 1 / 3


def arrays_of(
    world: World, horizons: Horizons, light: LightPush, heat: HeatPush, thin: HeatPush, fine: Table, errors: Table
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
    torque["direct"] = torque["direct"] * [
        0.0,
        1.0,
        1.0,
    ]  # as in the rates: over a rotation there is none along the pole
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


def _between(lag: Seen, coarser: Seen, places: Places) -> tuple[np.ndarray, np.ndarray]:
    """Force and torque of the heat's delay, without its error of second order, at other places."""
    from scipy.interpolate import CubicSpline

    m = np.append(lag.places.mean_anomaly, lag.places.mean_anomaly[0] + 2 * np.pi)

    def carry(x: np.ndarray, thin: np.ndarray) -> np.ndarray:
        x = x + OVER_SHOT * (x - thin)
        spline = CubicSpline(m, np.concatenate([x, x[:1]]), bc_type="periodic")
        return np.asarray(spline(m[0] + np.mod(places.mean_anomaly - m[0], 2 * np.pi)))

    return carry(lag.force, coarser.force), carry(lag.torque, coarser.torque)
