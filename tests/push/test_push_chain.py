"""From a body to its rates: against a naive twin, itself turned, moved, scaled, and the marching twin."""

import naive_push
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from push_bodies import ORBIT_KEYS, SPIN_KEYS, about_z, body, hours_for, lump, rates_of, scales, shape

from smallbody.body import ShapeSource
from smallbody.constants import AU_M
from smallbody.heat import orbit_operator
from smallbody.light import places_between
from smallbody.push import drift
from smallbody.shape import Shape, prepare_shape, write_shape

SMALL = 1e-4  # of the natural scale of a rate: differences below it are beneath notice


def assert_same(one, two, share, *, keys=ORBIT_KEYS + SPIN_KEYS):
    """Rates of two runs differ by less than their numerical errors together, plus a share of the natural scale."""
    (a, a_error), (b, b_error) = rates_of(one, keys), rates_of(two, keys)
    natural = scales(one)
    for k in keys:
        assert abs(a[k] - b[k]) <= a_error[k] + b_error[k] + share * natural[k], k


# --- the naive twin ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("gamma", "e", "pole"),
    [(200.0, 0.15, (40.0, 65.0)), (1500.0, 0.4, (250.0, 8.0)), (30.0, 0.0, (130.0, -70.0))],
    ids=["upright", "lying on an eccentric orbit", "retrograde on a circular orbit"],
)
def test_the_chain_agrees_with_a_naive_twin(monkeypatch, gamma, e, pole):
    monkeypatch.setattr("smallbody.heat.lag.TOL", 1e-9)
    one = lump()
    lon, lat = np.radians(pole)
    asked = body(
        spin__pole_ecliptic_deg=pole, orbit__e=e, surface__thermal_inertia=gamma, solver__shadows=False,
        solver__rotation_nodes=16, solver__orbit_places=8, solver__light_places=16, spin__period_h=4.0,
    )  # fmt: skip
    result = drift(asked, shape=one)
    values, _ = rates_of(result)

    o = asked.orbit
    # a circular orbit has no perihelion: the twin gets one by the least eccentricity that its vectors can bear
    elements = (o.a_au * AU_M, max(e, 1e-7), *np.radians([o.i_deg, o.node_deg, o.peri_deg]))
    places = places_between(o.a_au * AU_M, e, 8)
    light = naive_push.equal_light_places(e, 16)
    orbit, spin, absorbed, excess = naive_push.naive_chain(
        one, elements, np.array([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)]), asked.spin.rate,
        result.provenance["mass_kg"], 0.1, 0.9, gamma, light, (places.mean_anomaly, places.weight),
        orbit_operator(places), 16,
    )  # fmt: skip
    deg_per_myr = np.degrees(1) * naive_push.MYR
    found = {
        "da_dt_au_per_myr": orbit[0] / AU_M * naive_push.MYR,
        "da_dt_m_per_yr": orbit[0] * naive_push.MYR / 1e6,
        "de_dt_per_myr": orbit[1] * naive_push.MYR,
        "di_dt_deg_per_myr": orbit[2] * deg_per_myr,
        "dnode_dt_deg_per_myr": orbit[3] * deg_per_myr,
        "dperi_dt_deg_per_myr": orbit[4] * deg_per_myr,
        "dmean_anomaly_dt_deg_per_myr": orbit[5] * deg_per_myr,
        "domega_dt_rad_per_d2": spin[0] * naive_push.DAY**2,
        "dobliquity_dt_deg_per_myr": spin[1] * deg_per_myr,
        "dazimuth_dt_deg_per_myr": spin[2] * deg_per_myr,
    }
    undefined = ("dperi_dt_deg_per_myr", "dmean_anomaly_dt_deg_per_myr", "de_dt_per_myr") if e == 0 else ()
    natural = scales(result)
    for key, value in found.items():
        if key not in undefined:  # the twin sums light at 2048 nodes of a rotation
            assert abs(values[key] - value) < 2e-7 * natural[key], key
    gained, taken = (places.weight @ (x.mean(1) @ one.areas_m2) for x in (excess, absorbed))
    assert abs(gained / taken - result.checks.energy_balance) < 1e-9


def test_the_table_of_open_skies_serves_facets_as_well_as_solving_each(monkeypatch):
    one = shape("ellipsoid", 320, axes=(0.3, 0.25, 0.2))
    asked = body(solver__shadows=False)
    table = drift(asked, shape=one)
    monkeypatch.setattr("smallbody.push.recoil.WORTH_A_TABLE", 10_000)
    each = drift(asked, shape=one)
    a, b, natural = rates_of(table)[0], rates_of(each)[0], scales(table)
    for k in ORBIT_KEYS + SPIN_KEYS:  # 81 latitudes, cubic in between
        assert abs(a[k] - b[k]) < 5e-5 * natural[k], k
    t = [np.asarray(d.arrays["facet_temperature_k"].values, float) for d in (table, each)]
    assert np.abs(t[0] - t[1]).max() < 4.0  # K; linear in between, at sunrise: for pictures
    assert np.abs(t[0] - t[1]).mean() < 0.1


# --- what must not matter ------------------------------------------------------------------------------------------


@given(angle=st.floats(-3.2, 3.2), seed=st.integers(0, 3))
@settings(max_examples=6)
def test_turning_the_shape_about_its_spin_axis_leaves_rates_alone(angle, seed):
    one = shape("cratered", 80, seed)
    asked = body(solver__rotation_nodes=32)
    assert_same(drift(asked, shape=one), drift(asked, shape=one.turned(about_z(angle))), 3 * SMALL)


@given(angle=st.floats(0.1, 3.1), rotations=st.sampled_from([1.0, 2.37, 7.0]))
@settings(max_examples=3)
def test_turning_a_slow_rotator_about_its_spin_axis_leaves_rates_alone(angle, rotations):
    one = lump()
    asked = body(spin__period_h=hours_for(rotations), solver__shadows=False, solver__rotation_nodes=48)
    (a, _), (b, _) = (rates_of(drift(asked, shape=s)) for s in (one, one.turned(about_z(angle))))
    natural = scales(drift(asked, shape=one))
    for k in a:
        assert abs(a[k] - b[k]) < 1e-3 * natural[k], k


@given(shift=st.tuples(*[st.floats(-500, 500)] * 3))
@settings(max_examples=3)
def test_shifting_the_file_leaves_rates_alone(tmp_path_factory, shift):
    one = shape("cratered", 80)
    folder = tmp_path_factory.mktemp("shifted")
    results = []
    for name, there in (("here.obj", one), ("there.obj", one.moved(np.array(shift)))):
        write_shape(there, folder / name)
        results.append(drift(body(shape__file=str(folder / name))))
    (a, _), (b, _) = map(rates_of, results)
    for k, natural in scales(results[0]).items():  # numbers in files have some ten digits
        assert abs(a[k] - b[k]) < 1e-5 * natural, k


@given(seed=st.integers(0, 1000))
@settings(max_examples=4)
def test_renumbering_facets_and_corners_leaves_rates_alone(seed):
    one = shape("twolobe", 80)
    order = np.random.default_rng(seed)
    corner = order.permutation(len(one.vertices_m))
    vertices = np.empty_like(one.vertices_m)
    vertices[corner] = one.vertices_m
    other = Shape(vertices, corner[one.facets][order.permutation(len(one.facets))])
    a, b = (drift(body(), shape=s) for s in (one, other))
    natural = scales(a)
    for k in ORBIT_KEYS + SPIN_KEYS:
        assert abs(rates_of(a)[0][k] - rates_of(b)[0][k]) < 1e-7 * natural[k], k  # as far as heat is settled


def test_naming_other_corners_first_leaves_rates_alone():
    one = shape("twolobe", 80)
    other = Shape(one.vertices_m, np.roll(one.facets, 1, axis=1))
    assert_same(*(drift(body(), shape=s) for s in (one, other)), SMALL)


def test_the_same_pole_in_ecliptic_coordinates_gives_the_same_rates():
    asked = body()
    lon, lat = np.degrees(asked.pole_ecliptic)
    same = body(spin__pole_ecliptic_deg=(lon, lat))
    a, b = (rates_of(drift(x, shape=lump()))[0] for x in (asked, same))
    for k in a:
        assert np.isclose(a[k], b[k], rtol=1e-9), k


def test_mass_gives_what_the_same_density_gives():
    one = lump()
    a, b = (
        rates_of(drift(x, shape=one))[0] for x in (body(), body(bulk__mass_kg=2000.0 * one.mass.volume_m3))
    )  # fmt: skip
    assert a == pytest.approx(b, rel=1e-12)


def test_the_principal_axis_is_found_whichever_way_the_file_stands(tmp_path):
    one = shape("ellipsoid", 80, axes=(0.3, 0.25, 0.15))
    tilted = one.turned(_tilt())
    write_shape(tilted, tmp_path / "tilted.obj")
    results = [
        drift(body(), shape=one),
        drift(body(shape__file=str(tmp_path / "tilted.obj"), shape__spin_axis="principal")),
    ]
    (a, _), (b, _) = map(rates_of, results)
    natural = scales(results[0])
    for k in ("da_dt_au_per_myr", "de_dt_per_myr", "domega_dt_rad_per_d2"):
        assert abs(a[k] - b[k]) < 1e-3 * natural[k], k


def _tilt(angle=0.5):
    c, s = np.cos(angle), np.sin(angle)
    return np.array([[c, 0.0, s], [0.0, 1.0, 0.0], [-s, 0.0, c]])


def test_twice_the_facets_move_the_drift_of_a_sphere_by_no_more_than_is_said():
    coarse, fine = (
        drift(body(shape__sphere_facets=n, solver__halved_shape=True, surface__bond_albedo=0.3)) for n in (320, 720)
    )
    moved = abs(fine.orbit.da_dt_au_per_myr.value - coarse.orbit.da_dt_au_per_myr.value)
    said = coarse.orbit.da_dt_au_per_myr.numerical_error + coarse.checks.halved_shape["da_dt_au_per_myr"]
    assert 0 < moved < said
    assert coarse.checks.halved_shape["da_dt_au_per_myr"] < 0.05 * abs(coarse.orbit.da_dt_au_per_myr.value)


# --- scaling laws --------------------------------------------------------------------------------------------------


def test_orbit_rates_go_with_one_over_density_and_size_and_spin_rates_with_one_over_density_and_size_squared():
    one = shape("twolobe", 80)
    small, large = drift(body(), shape=one), drift(body(bulk__density_kg_m3=3100.0), shape=one.scaled(2.0))
    (a, _), (b, _) = rates_of(small), rates_of(large)
    for k in a:
        assert np.isclose(a[k], b[k] * 3100 / 2000 * (2.0 if k in ORBIT_KEYS else 4.0), rtol=1e-10), k
    assert np.isclose(small.acceleration.a2_au_per_d2, large.acceleration.a2_au_per_d2 * 3100 / 2000 * 2, rtol=1e-10)
    assert small.sphere.da_dt_au_per_myr == pytest.approx(large.sphere.da_dt_au_per_myr * 3.1, rel=1e-12)


@pytest.mark.parametrize(("a_au", "e"), [(2.4, 0.15), (1.2, 0.55), (3.0, 0.0)])
def test_the_spin_torque_goes_with_the_mean_sunlight(a_au, e):
    """1/(a^2 sqrt(1 - e^2)) (Rubincam 2000; the mean of 1/r^2 over an orbit)."""
    there, here = (
        drift(body(orbit__a_au=a, orbit__e=x, solver__light_places=192, surface__thermal_inertia=0.0), shape=lump())
        for a, x in ((a_au, e), (1.2, 0.15))
    )
    expected = (1.2 / a_au) ** 2 * np.sqrt((1 - 0.15**2) / (1 - e * e))
    for source in ("thermal", "scattered"):
        a, b = (d.by_source[source].spin.domega_dt_rad_per_d2.value for d in (there, here))
        assert np.isclose(a, b * expected, rtol=1e-9)


# --- energy --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "changes",
    [
        {}, {"surface__thermal_inertia": 0.0}, {"surface__thermal_inertia": 10_000.0}, {"orbit__e": 0.6},
        {"orbit__e": 0.9, "surface__thermal_inertia": 2000.0, "solver__rotation_nodes": 32, "solver__orbit_places": 48},
        {"spin__obliquity_deg": 90.0, "surface__thermal_inertia": 1500.0}, {"orbit__a_au": 30.0},
        {"solver__orbit_places": 9}, {"solver__rotation_nodes": 16}, {"spin__period_h": hours_for(20.37)},
        {"spin__period_h": hours_for(0.7)}, {"spin__period_h": hours_for(60), "solver__method": "march"},
    ],
    ids=lambda changes: ", ".join(f"{k.split('__')[1]} {v}" for k, v in changes.items()) or "plain",
)  # fmt: skip
def test_energy_out_is_energy_in(changes):
    checks = drift(body(**changes), shape=lump()).checks
    assert abs(checks.energy_balance) < 1e-5


# --- two roads to the temperature ----------------------------------------------------------------------------------


@pytest.mark.parametrize("gamma", [50.0, 1000.0])
def test_lag_and_march_agree_on_a_body_of_many_rotations(gamma):
    one = shape("cratered", 80)
    asked = {"spin__period_h": hours_for(200.0), "surface__thermal_inertia": gamma}
    lag = drift(body(**asked), shape=one)
    march = drift(body(**asked, solver__method="march", solver__rotation_nodes=96), shape=one)
    natural = scales(lag)
    (a, _), (b, _) = rates_of(lag), rates_of(march)
    assert np.isclose(a["da_dt_au_per_myr"], b["da_dt_au_per_myr"], rtol=5e-3)
    for k in a:
        assert abs(a[k] - b[k]) < 3e-3 * natural[k], k


def test_lag_and_march_agree_on_a_slow_rotator():
    one = lump()
    asked = {"spin__period_h": hours_for(20.37), "solver__shadows": False}
    lag, march = (drift(body(**asked, solver__method=m, solver__march_steps=192), shape=one) for m in ("lag", "march"))
    (a, a_error), (b, b_error) = rates_of(lag), rates_of(march)
    natural = scales(lag)
    for k in a:
        assert abs(a[k] - b[k]) < 2 * (a_error[k] + b_error[k]) + 1e-4 * natural[k], k
    assert np.isclose(a["da_dt_au_per_myr"], b["da_dt_au_per_myr"], rtol=2e-3)


def test_two_clocks_and_one_long_period_meet_at_fifty_rotations(monkeypatch):
    one = lump()
    asked = body(spin__period_h=hours_for(52.0), solver__shadows=False)
    clocks = drift(asked, shape=one)
    monkeypatch.setattr("smallbody.push.solve.SLOW_ROTATIONS", 60.0)
    period = drift(asked, shape=one)
    (a, _), (b, _) = rates_of(clocks), rates_of(period)
    natural = scales(clocks)
    assert np.isclose(a["da_dt_au_per_myr"], b["da_dt_au_per_myr"], rtol=2e-3)
    for k in a:
        assert abs(a[k] - b[k]) < 1e-3 * natural[k], k


def test_a_shape_prepared_from_its_source_is_what_drift_uses():
    source = ShapeSource(ellipsoid_axes=(0.3, 0.25, 0.2), facets=80, diameter_km=0.5)
    asked = body(shape__ellipsoid_axes=(0.3, 0.25, 0.2), shape__facets=80)
    a, b = drift(asked), drift(asked, shape=prepare_shape(source))
    assert rates_of(a) == rates_of(b)
    assert a.provenance["shape_sha256"] == b.provenance["shape_sha256"]
