"""Corners of the range of inputs: nothing fails, nothing is NaN that should not be, and the result is JSON."""

import json
import warnings

import numpy as np
import pytest
from push_bodies import ORBIT_KEYS, SPIN_KEYS, body, hours_for, hull, lump, rates_of, scales, shape

from smallbody.errors import BodyError, Note, SizeMismatch, SmallbodyError
from smallbody.light import horizons_of
from smallbody.push import drift

NO_PERIHELION = {"dperi_dt_deg_per_myr", "dmean_anomaly_dt_deg_per_myr"}
NO_NODE = {"dnode_dt_deg_per_myr"}
NO_AZIMUTH = {"dazimuth_dt_deg_per_myr"}
SLOW = {"spin__period_h": hours_for(20.37)}

CORNERS = {
    "e 0": ({"orbit__e": 0.0}, NO_PERIHELION),
    "e 1e-9": ({"orbit__e": 1e-9}, set()),
    "e 0.97": ({"orbit__e": 0.97, "solver__rotation_nodes": 16, "solver__orbit_places": 48}, set()),
    "i 0": ({"orbit__i_deg": 0.0}, NO_NODE),
    "i 180": ({"orbit__i_deg": 180.0}, NO_NODE),
    "i 1e-4": ({"orbit__i_deg": 1e-4}, set()),
    "obliquity 0": ({"spin__obliquity_deg": 0.0}, NO_AZIMUTH),
    "obliquity 180": ({"spin__obliquity_deg": 180.0}, NO_AZIMUTH),
    "obliquity 90, pole on the Sun": ({"spin__obliquity_deg": 90.0, "spin__pole_azimuth_deg": 0.0}, set()),
    "pole of the ecliptic": ({"spin__pole_ecliptic_deg": (0.0, 90.0), "orbit__i_deg": 0.0}, NO_AZIMUTH | NO_NODE),
    "pole in the ecliptic": ({"spin__pole_ecliptic_deg": (123.0, 0.0)}, set()),
    "everything 0": (
        {"orbit__e": 0.0, "orbit__i_deg": 0.0, "spin__obliquity_deg": 0.0}, NO_PERIHELION | NO_NODE | NO_AZIMUTH,
    ),
    "albedo 0": ({"surface__bond_albedo": 0.0}, set()),
    "albedo 1": ({"surface__bond_albedo": 1.0}, set()),
    "inertia 0": ({"surface__thermal_inertia": 0.0}, set()),
    "inertia 10,000": ({"surface__thermal_inertia": 10_000.0}, set()),
    "emissivity 0.01": ({"surface__emissivity": 0.01}, set()),
    "slow": (SLOW, set()),
    "slow, albedo 1": (SLOW | {"surface__bond_albedo": 1.0}, set()),
    "slow, inertia 0": (SLOW | {"surface__thermal_inertia": 0.0}, set()),
    "slow, inertia 10,000": (SLOW | {"surface__thermal_inertia": 10_000.0}, set()),
    "slow, e 0.9": (SLOW | {"orbit__e": 0.9, "solver__rotation_nodes": 16}, set()),
    "just slow": ({"spin__period_h": hours_for(49.99)}, set()),
    "just not slow": ({"spin__period_h": hours_for(50.01)}, set()),
    "0.29 rotations": ({"spin__period_h": hours_for(0.29)}, set()),
    "0.31 rotations": ({"spin__period_h": hours_for(0.31)}, set()),
    "100,000 rotations": ({"spin__period_h": hours_for(1e5)}, set()),
    "march": (SLOW | {"solver__method": "march"}, set()),
    "march, few steps": (SLOW | {"solver__method": "march", "solver__march_steps": 48}, set()),
    "march, albedo 1": (SLOW | {"solver__method": "march", "surface__bond_albedo": 1.0}, set()),
    "march, inertia 0": (SLOW | {"solver__method": "march", "surface__thermal_inertia": 0.0}, set()),
    "march, 0.3 rotations": ({"spin__period_h": hours_for(0.3), "solver__method": "march"}, set()),
    "mass": ({"bulk__mass_kg": 1e11}, set()),
    "no shadows": ({"solver__shadows": False}, set()),
    "8 places": ({"solver__orbit_places": 8, "solver__light_places": 8}, set()),
    "odd places": ({"solver__orbit_places": 17, "solver__light_places": 33}, set()),
    "16 nodes": ({"solver__rotation_nodes": 16}, set()),
    "18 nodes": ({"solver__rotation_nodes": 18}, set()),
    "22 nodes": ({"solver__rotation_nodes": 22}, set()),
    "one sample": ({"solver__lit_samples": 1}, set()),
    "far from the Sun": ({"orbit__a_au": 1000.0}, set()),
    "close to the Sun": ({"orbit__a_au": 0.02, "spin__period_h": 0.5}, set()),
    "dust": ({"shape__diameter_km": 1e-9}, set()),
}  # fmt: skip


def finite(rates):
    return {k for k, r in vars(rates).items() if np.isfinite(r.value) and np.isfinite(r.numerical_error)}


@pytest.mark.parametrize("corner", CORNERS)
def test_a_corner_of_the_inputs_has_finite_rates_but_for_those_without_meaning(corner):
    changes, meaningless = CORNERS[corner]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", Note)
        result = drift(body(**changes), shape=shape("cratered", 80))
    for part in (result, *result.by_source.values()):
        missing = {k for rates in (part.orbit, part.spin) for k in vars(rates) if k not in finite(rates)}
        missing -= {"doubling_time_myr"} if part.spin.domega_dt_rad_per_d2.value == 0 else set()
        assert missing == meaningless
    for name, q in result.arrays.items():
        if name in ("rate_value", "rate_error"):
            assert np.isnan(q.values).sum() == 4 * len(meaningless)
        elif q.values.dtype != object:
            assert np.isfinite(q.values).all(), name
    checks, acceleration = result.checks, result.acceleration
    for number in (checks.energy_balance, checks.direct_spin_residual, acceleration.a2_au_per_d2, acceleration.beta):
        assert np.isfinite(number)
    assert abs(checks.energy_balance) < 1e-5
    assert all(np.isfinite(list(acceleration.numerical_error.values())))
    assert acceleration.beta > 0

    told = json.loads(json.dumps(result.to_dict(), allow_nan=False))
    assert {k for k in ORBIT_KEYS if told["orbit"][k]["value"] is None} == meaningless & set(ORBIT_KEYS)
    assert {k for k in SPIN_KEYS if told["spin"][k]["value"] is None} == meaningless & set(SPIN_KEYS)
    assert set(told["by_source"]) == {"thermal", "scattered", "direct"}
    assert told["orbit"]["da_dt_au_per_myr"]["value"] == result.orbit.da_dt_au_per_myr.value


@pytest.mark.parametrize("facets", [4, 8, 12, 20])
@pytest.mark.parametrize("shadows", [True, False])
def test_bodies_of_a_few_facets_have_rates(facets, shadows):
    corners = {
        4: [[1, 1, 1], [-1, -1, 1], [-1, 1, -1], [1, -1, -1]],
        8: [[1, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -1, 0], [0, 0, 1], [0, 0, -1]],
        12: [[x, y, z] for x in (-1, 1) for y in (-1, 1) for z in (-1, 1)],
        20: shape("sphere", 20).vertices_m / 250.0,
    }[facets]
    one = hull(250.0 * np.array(corners) * [1.1, 1.0, 0.9])
    assert len(one.facets) == facets
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", Note)  # that some cannot be halved
        result = drift(body(solver__halved_shape=True, solver__shadows=shadows), shape=one)
    assert result.orbit.da_dt_au_per_myr.value > 0
    assert result.checks.facets == facets


def test_a_body_that_cannot_be_halved_says_so():
    with pytest.warns(Note, match="denser shape"):
        result = drift(body(solver__halved_shape=True), shape=shape("gaussian", 80))
    assert dict(result.checks.halved_shape) == {}
    assert any("denser shape" in note for note in result.notes)


def test_a_body_that_can_be_halved_says_by_how_much_each_rate_moves():
    result = drift(body(solver__halved_shape=True, orbit__i_deg=0.0), shape=shape("gaussian", 240))
    moved = result.checks.halved_shape
    assert set(moved) == set(ORBIT_KEYS + SPIN_KEYS)
    assert moved["da_dt_au_per_myr"] > 0
    assert np.isnan(moved["dnode_dt_deg_per_myr"])
    assert (
        json.loads(json.dumps(result.to_dict(), allow_nan=False))["checks"]["halved_shape"]["dnode_dt_deg_per_myr"]
        is None
    )


def test_rates_without_a_spin_change_double_never():
    result = drift(body(surface__bond_albedo=0.0), shape=lump())
    never = result.by_source["scattered"].spin
    assert never.domega_dt_rad_per_d2.value == 0.0
    assert never.doubling_time_myr.value == np.inf
    assert result.to_dict()["by_source"]["scattered"]["spin"]["doubling_time_myr"]["value"] is None


def test_too_few_places_for_an_eccentric_orbit_are_refused():
    with pytest.raises(BodyError, match=r"orbit_places = 8 is too few at orbit.e = 0.9"):
        drift(body(orbit__e=0.9, solver__orbit_places=8), shape=lump())


def test_horizons_of_another_shape_are_refused():
    one = shape("cratered", 80)
    with pytest.raises(SizeMismatch, match="12 facets"):
        drift(body(), shape=lump(), horizons=horizons_of(one, 64, 4))
    with pytest.raises(SizeMismatch, match="32 meridians"):
        drift(body(), shape=one, horizons=horizons_of(one, 32, 4))


def test_horizons_at_hand_are_used():
    one = shape("cratered", 80)
    assert rates_of(drift(body(), shape=one, horizons=horizons_of(one, 64, 4))) == rates_of(drift(body(), shape=one))


def test_a_rate_is_not_a_number_by_accident():
    rate = drift(body(), shape=lump()).orbit.da_dt_au_per_myr
    with pytest.raises(SmallbodyError, match="value"):
        float(rate)
    assert rate.relative_error == pytest.approx(rate.numerical_error / rate.value)


def test_the_same_run_gives_the_same_to_the_last_bit_on_one_thread_and_on_two(monkeypatch):
    one = shape("cratered", 240)
    told = []
    for threads in ("1", "2", "2"):
        monkeypatch.setenv("SMALLBODY_THREADS", threads)
        told.append(rates_of(drift(body(), shape=one)))
    assert told[0] == told[1] == told[2]


# --- advice ----------------------------------------------------------------------------------------------------------


def test_a_large_numerical_error_says_what_to_raise():
    result = drift(body(solver__rotation_nodes=16, solver__lit_samples=1), shape=shape("cratered", 80))
    spin = result.spin.domega_dt_rad_per_d2
    assert spin.numerical_error > 0.02 * abs(spin.value)
    assert any(n.startswith("domega_dt_rad_per_d2: numerical error") and "raise solver." in n for n in result.notes)


def test_a_small_numerical_error_says_nothing():
    result = drift(body(solver__shadows=False), shape=shape("sphere", 320))
    assert result.orbit.da_dt_au_per_myr.relative_error < 1e-3
    assert not any(note.startswith("da_dt") for note in result.notes)


# --- arrays ----------------------------------------------------------------------------------------------------------


def test_the_arrays_add_up_to_the_rates():
    result = drift(body(), shape=shape("cratered", 80))
    a = {name: q.values for name, q in result.arrays.items()}
    moment = result.provenance["moment_of_inertia_kg_m2"]
    torque = np.einsum("p,spk->sk", a["place_weight"], a["torque_n_m"])
    names = list(a["rate"])
    at = names.index("domega_dt_rad_per_d2")
    for k, source in enumerate(("thermal", "scattered", "direct")):
        found = torque[k, 0] / moment * 86400**2
        # lag is carried from the places of the heat to those of the light by a spline
        assert found == pytest.approx(a["rate_value"][1 + k, at], abs=1e-7 * scales(result)["domega_dt_rad_per_d2"]), (
            source
        )
    assert a["rate_value"][0] == pytest.approx(a["rate_value"][1:].sum(axis=0), rel=1e-12)
    assert a["rate_value"][0, at] == result.spin.domega_dt_rad_per_d2.value
    assert a["rate_error"][0, at] == result.spin.domega_dt_rad_per_d2.numerical_error


def test_the_sun_goes_westward_over_the_body():
    """The body turns about +z, so that the Sun's body longitude falls, whatever the pole."""
    for obliquity in (20.0, 160.0):
        longitude = drift(body(spin__obliquity_deg=obliquity), shape=lump()).arrays["subsolar_longitude_deg"].values
        assert (np.diff(longitude) < 0).all()
        assert longitude[0] - longitude[-1] == pytest.approx(360 * 63 / 64)


def test_afternoon_is_warmer_than_morning():
    """Thermal inertia delays the heat: with the Sun as high, a facet is warmer after noon (common practice)."""
    result = drift(body(spin__obliquity_deg=0.0, orbit__e=0.0, solver__shadows=False), shape=shape("sphere", 320))
    one = shape("sphere", 320)
    a = {name: np.asarray(q.values) for name, q in result.arrays.items() if q.values.dtype != object}
    facet = int(np.argmin(np.abs(one.normals[:, 2])))
    light, temperature = a["facet_absorbed_w_m2"][facet], a["facet_temperature_k"][facet]
    noon = int(np.argmax(light))
    later, earlier = (noon + 8) % 64, (noon - 8) % 64
    assert temperature[later] > temperature[earlier] + 5.0
    assert np.roll(temperature, -noon).argmax() in range(1, 16)
