"""Bodies and shapes that the tests of the push room share: small, so that a whole drift takes a tenth of a second."""

from functools import cache

import numpy as np
from scipy.spatial import ConvexHull

from smallbody.body import Body, Bulk, Orbit, ShapeSource, Solver, Spin, Surface
from smallbody.shape import Shape, make_shape

ORBIT_KEYS = (
    "da_dt_au_per_myr", "da_dt_m_per_yr", "de_dt_per_myr", "di_dt_deg_per_myr", "dnode_dt_deg_per_myr",
    "dperi_dt_deg_per_myr", "dmean_anomaly_dt_deg_per_myr",
)  # fmt: skip
SPIN_KEYS = ("domega_dt_rad_per_d2", "dobliquity_dt_deg_per_myr", "dazimuth_dt_deg_per_myr")

BODY = Body(
    name="pebble",
    shape=ShapeSource(sphere_facets=80, diameter_km=0.5),
    bulk=Bulk(density_kg_m3=2000.0),
    surface=Surface(bond_albedo=0.1, emissivity=0.9, thermal_inertia=200.0),
    spin=Spin(period_h=6.0, obliquity_deg=30.0, pole_azimuth_deg=40.0),
    orbit=Orbit(a_au=1.2, e=0.15, i_deg=10.0, node_deg=70.0, peri_deg=20.0),
    solver=Solver(lit_samples=4, halved_shape=False),
)


def body(**changes):
    """BODY with some keys changed; `spin__period_h` stands for spin.period_h."""
    return BODY.changed({key.replace("__", "."): value for key, value in changes.items()})


def hours_for(rotations, a_au=BODY.orbit.a_au):
    """Rotation period that fits so many times into an orbit."""
    return BODY.changed({"orbit.a_au": a_au}).orbit.period_s / 3600 / rotations


@cache
def shape(kind, facets=80, seed=0, diameter_km=0.5, **numbers):
    return make_shape(kind, facets, seed, diameter_km=diameter_km, **numbers)


def hull(points):
    """The convex hull of points as a shape with its centre of mass at the origin."""
    points = np.asarray(points, float)
    facets = ConvexHull(points).simplices
    a, b, c = (points[facets[:, k]] for k in range(3))
    inward = np.einsum("fx,fx->f", np.cross(b - a, c - a), a - points.mean(axis=0)) < 0
    facets[inward] = facets[inward][:, ::-1]
    made = Shape(points, facets)
    return made.moved(-made.mass.centre_m)


def lump(seed=3, corners=8, size_m=250.0):
    """A convex body of a dozen facets without any symmetry."""
    u = np.random.default_rng(seed).normal(size=(corners, 3))
    u /= np.linalg.norm(u, axis=1, keepdims=True)
    return hull(size_m * u * [1.2, 1.0, 0.8])


def about_z(angle):
    c, s = np.cos(angle), np.sin(angle)
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def rates_of(drift, keys=ORBIT_KEYS + SPIN_KEYS, source=None):
    """Values and numerical errors of rates, two dictionaries."""
    part = drift if source is None else drift.by_source[source]
    rates = {k: getattr(part.orbit if k in ORBIT_KEYS else part.spin, k) for k in keys}
    return {k: r.value for k, r in rates.items()}, {k: r.numerical_error for k, r in rates.items()}


def scales(drift):
    """Natural size of every rate: what a push of S pi R^2/c in the most effective direction would do."""
    inputs = drift.provenance["body"]
    radius, mass = drift.provenance["diameter_km"] * 500, drift.provenance["mass_kg"]
    moment = drift.provenance["moment_of_inertia_kg_m2"]
    au, year = 149_597_870_700.0, 365.25 * 86400
    a, e = inputs["orbit"]["a_au"] * au, inputs["orbit"]["e"]
    flux = 3.828e26 / (4 * np.pi * a * a * np.sqrt(1 - e * e))
    speed = flux * np.pi * radius**2 / 299_792_458.0 / mass / np.sqrt(1.3271244e20 / a**3)  # m/s
    turn = np.degrees(speed / a * 1e6 * year)
    spin = flux / 299_792_458.0 * radius**3 / moment
    pole = np.degrees(spin / (2 * np.pi / (inputs["spin"]["period_h"] * 3600)) * 1e6 * year)
    out = dict.fromkeys(ORBIT_KEYS, turn) | dict.fromkeys(SPIN_KEYS, pole)
    return out | {
        "da_dt_au_per_myr": speed / au * 1e6 * year,
        "da_dt_m_per_yr": speed * year,
        "de_dt_per_myr": speed / a * 1e6 * year,
        "domega_dt_rad_per_d2": spin * 86400**2,
    }
