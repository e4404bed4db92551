"""Rates of elements and pole: against motions integrated step by step, and against published numbers."""

import numpy as np
import pytest
from naive_push import elements_of, state
from push_bodies import BODY, body, lump
from scipy.integrate import solve_ivp

from smallbody.constants import AU_M, DAY_S, GM_SUN, MYR_S
from smallbody.light import places_in_true_anomaly
from smallbody.push import drift, drift_of_transverse, element_rates, spin_rates
from smallbody.push.gauss import ORBIT_UNITS, mean_coefficients

A_AU = 1.3
A = A_AU * AU_M
YEAR = 2 * np.pi * np.sqrt(A**3 / GM_SUN)
DEG_PER_MYR = np.degrees(1.0) * MYR_S
KICK = 1e-7  # of the Sun's attraction at one au: first order in it is all there is, round-off is small beside it


def plain(f):
    """An acceleration that follows the sunlight, nothing else."""
    return 1.0


def lopsided(f):
    """One that depends on the place as well."""
    return 1.0 + 0.6 * np.cos(f) - 0.8 * np.sin(f) + 0.3 * np.cos(2 * f) - 0.5 * np.sin(3 * f)


def integrated_rates(e, inclination, node, peri, axis, shape_of):
    """Mean rates of (a, e, i, node, peri, mean anomaly at epoch) over one orbit from perihelion, by integration.

    The sixth is that of M - (integral of n dt), M and n being those of the moment. Kicked one way, then the other:
    half of the difference is of first order in the kick, and the integrator's own errors cancel.
    """
    r0, v0 = state((A, e, inclination, node, peri), 0.0)
    unit, clock = A, np.sqrt(A**3 / GM_SUN)
    ends = []
    for sign in (1.0, -1.0):

        def motion(t, y, sign=sign):
            r, v = y[:3], y[3:6]
            size = np.sqrt(r @ r)
            h = np.cross(r, v)
            radial, normal = r / size, h / np.sqrt(h @ h)
            towards = (radial, np.cross(normal, radial), normal)[axis]
            ecc = np.cross(v, h) - radial
            f = np.arctan2(r @ np.cross(normal, ecc), r @ ecc)
            push = sign * KICK * shape_of(f) / size**2 * towards
            return np.concatenate([v, -r / size**3 + push, [(2 / size - v @ v) ** 1.5]])

        start = np.concatenate([r0 / unit, v0 * clock / unit, [0.0]])
        end = solve_ivp(motion, (0, 2 * np.pi), start, method="DOP853", rtol=1e-13, atol=1e-14).y[:, -1]
        found = elements_of(end[:3] * unit, end[3:6] * unit / clock)
        found[5] -= end[6] - 2 * np.pi  # both are near a whole turn
        ends.append(found)
    change = ends[0] - ends[1]
    change[3:] = (change[3:] + np.pi) % (2 * np.pi) - np.pi
    return change / 2 / YEAR


@pytest.mark.parametrize("shape_of", [plain, lopsided])
@pytest.mark.parametrize("axis", [0, 1, 2], ids=["radial", "transverse", "normal"])
@pytest.mark.parametrize(("e", "inclination"), [(0.25, 0.4), (0.7, 2.1)])
def test_element_rates_are_those_of_an_orbit_integrated_under_the_same_push(e, inclination, axis, shape_of):
    node, peri = 1.1, 0.7
    expected = integrated_rates(e, inclination, node, peri, axis, shape_of)
    places = places_in_true_anomaly(A, e, 64)
    accel = np.zeros((64, 3))
    accel[:, axis] = KICK * GM_SUN / places.distance_m**2 * [shape_of(f) for f in places.true_anomaly]
    found = element_rates(places, accel, inclination, peri)
    scale = KICK * np.sqrt(GM_SUN / A**3)  # of all rates, per second
    assert abs(found["da_dt_au_per_myr"] / MYR_S * AU_M - expected[0]) < 1e-5 * scale * A
    assert found["da_dt_m_per_yr"] * 1e6 / AU_M == pytest.approx(found["da_dt_au_per_myr"], rel=1e-12, abs=1e-20)
    assert abs(found["de_dt_per_myr"] / MYR_S - expected[1]) < 1e-5 * scale
    for key, value in zip(list(ORBIT_UNITS)[3:], expected[2:]):
        assert abs(found[key] / DEG_PER_MYR - value) < 2e-5 * scale, key


def test_a_flat_orbit_has_no_node_and_the_longitude_of_its_perihelion_moves():
    places = places_in_true_anomaly(A, 0.3, 64)
    accel = np.stack([np.cos(places.true_anomaly), 0.5 + np.sin(places.true_anomaly), np.ones(64)], axis=1) * 1e-12
    for flat, tilt, sign in ((0.0, 1e-7, 1.0), (np.pi, np.pi - 1e-7, -1.0)):
        none, little = (element_rates(places, accel, i, 0.7) for i in (flat, tilt))
        assert np.isnan(none["dnode_dt_deg_per_myr"])
        longitude = little["dperi_dt_deg_per_myr"] + sign * little["dnode_dt_deg_per_myr"]
        assert none["dperi_dt_deg_per_myr"] == pytest.approx(longitude, rel=1e-6)
        for key in ("da_dt_au_per_myr", "de_dt_per_myr", "di_dt_deg_per_myr", "dmean_anomaly_dt_deg_per_myr"):
            assert none[key] == pytest.approx(little[key], rel=1e-9)


def test_a_circular_orbit_has_no_perihelion():
    places = places_in_true_anomaly(A, 0.0, 16)
    found = element_rates(places, np.ones((16, 3)) * 1e-12, 0.2, 0.0)
    assert {k for k, x in found.items() if np.isnan(x)} == {"dperi_dt_deg_per_myr", "dmean_anomaly_dt_deg_per_myr"}


def test_the_rates_do_not_depend_on_how_many_places_there_are():
    def rates(count):
        places = places_in_true_anomaly(A, 0.6, count)
        f = places.true_anomaly
        accel = np.stack([lopsided(f), lopsided(f + 1), lopsided(f + 2)], 1) / places.distance_m[:, None] ** 2
        return element_rates(places, accel, 0.3, 0.4)

    few, many = rates(32), rates(512)
    for key, value in many.items():
        assert few[key] == pytest.approx(value, rel=1e-9), key


# --- A1, A2, A3 ------------------------------------------------------------------------------------------------------


def test_the_published_pair_of_transverse_acceleration_and_drift():
    """(101955) Bennu: -19.0 +- 0.1 x 1e-4 au/Myr (Chesley et al. 2014, Icarus 235, 5, abstract) and A2 = -4.55e-14
    au/d2 belong together by da/dt = 2 A2 (1 au)^2/(n a^2 (1 - e^2)) (Farnocchia et al. 2013, Icarus 224, 1; the orbit,
    a = 1.126 au and e = 0.204, from memory)."""
    assert drift_of_transverse(-4.55e-14, 1.126 * AU_M, 0.204) == pytest.approx(-19.0e-4, abs=0.1e-4)


def test_on_a_circular_orbit_the_drift_is_that_of_the_transverse_coefficient():
    result = drift(body(orbit__e=0.0), shape=lump())
    alone = drift_of_transverse(result.acceleration.a2_au_per_d2, 1.2 * AU_M, 0.0)
    # 192 places of the light and 24 of the heat are each circular: nothing radial is left
    assert result.orbit.da_dt_au_per_myr.value == pytest.approx(alone, rel=1e-12)
    assert result.orbit.da_dt_au_per_myr.value == pytest.approx(drift_by_hand(result.acceleration), rel=1e-9)


def drift_by_hand(acceleration):
    """Kepler's third law and the gain of energy: v dv = a_transverse v dt, on a circle of 1.2 au."""
    push = acceleration.a2_au_per_d2 * AU_M / DAY_S**2 / 1.2**2
    return 2 * push / np.sqrt(GM_SUN / (1.2 * AU_M) ** 3) * MYR_S / AU_M


@pytest.mark.parametrize("e", [0.0, 0.3, 0.8])
def test_a_push_that_follows_the_law_gets_its_own_coefficients_back(e):
    places = places_in_true_anomaly(A, e, 64)
    law = np.array([3e-13, -2e-14, 1e-15])
    accel = law * AU_M / DAY_S**2 * (AU_M / places.distance_m[:, None]) ** 2
    assert mean_coefficients(places, accel) == pytest.approx(law, rel=1e-12)
    drifted = element_rates(places, accel * [0, 1, 0], 0.1, 0.0)["da_dt_au_per_myr"]
    assert drifted == pytest.approx(drift_of_transverse(law[1], A, e), rel=1e-12)


def test_ten_years_of_drift_run_off_by_seven_kilometres():
    """7 km x (da/dt in 1e-4 au/Myr) x (decades)^2 x a^-1.5 (Vokrouhlicky, Milani & Chesley 2000, Icarus 148, 118;
    re-derived: three quarters of n (da/dt) t^2)."""
    a2 = 1e-4 / drift_of_transverse(1.0, A, 0.0)  # au/d2
    push = a2 * AU_M / DAY_S**2 * AU_M**2 / GM_SUN  # of the Sun's attraction
    n = np.sqrt(GM_SUN / A**3)
    span = 10 * 365.25 * DAY_S * n

    def motion(t, y, share):
        r, v = y[:2], y[2:]
        size3 = (r @ r) ** 1.5
        return np.concatenate([v, (-r + share * np.array([-r[1], r[0]])) / size3])

    ends = [
        solve_ivp(motion, (0, span), [1, 0, 0, 1], method="DOP853", rtol=1e-13, atol=1e-14, args=(s,)).y[:2, -1]
        for s in (1e4 * push, 0.0)  # 1e-4 of the true push would be lost in round-off
    ]
    behind = np.arctan2(ends[1][1], ends[1][0]) - np.arctan2(ends[0][1], ends[0][0])
    km = (behind + np.pi) % (2 * np.pi) - np.pi
    assert km * A / 1e4 / 1000 == pytest.approx(7.0 * A_AU**-1.5, rel=0.02)


# --- the spin --------------------------------------------------------------------------------------------------------


def test_spin_rates_are_those_of_a_rigid_body_integrated_under_the_same_torque():
    """Euler's equations with the attitude beside them; the torque keeps its direction in space for 120 rotations."""
    moments, omega = np.array([0.7, 0.85, 1.0]), 1.0
    tilt, azimuth = 0.6, 2.2
    pole = np.array([np.sin(tilt) * np.cos(azimuth), np.sin(tilt) * np.sin(azimuth), np.cos(tilt)])
    up = np.array([np.cos(tilt) * np.cos(azimuth), np.cos(tilt) * np.sin(azimuth), -np.sin(tilt)])
    sideways = np.array([-np.sin(azimuth), np.cos(azimuth), 0.0])
    parts = np.array([3e-7, 4e-7, -5e-7])
    torque = parts @ np.array([pole, up, sideways])

    def motion(t, y):
        w, axes = y[:3], y[3:].reshape(3, 3)  # rows: body axes in space
        turning = (axes @ torque - np.cross(w, moments * w)) / moments
        spin = w @ axes
        return np.concatenate([turning, np.cross(spin, axes).ravel()])

    times = 2 * np.pi * np.linspace(0, 120, 1201)
    start = np.concatenate([[0, 0, omega], np.array([up, sideways, pole]).ravel()])
    y = solve_ivp(motion, (0, times[-1]), start, method="DOP853", rtol=1e-11, atol=1e-13, t_eval=times).y
    z = y[9:12]
    rates = spin_rates(parts, moments[2], omega, tilt)
    for series, key, unit in (
        (y[2], "domega_dt_rad_per_d2", DAY_S**2),
        (np.arccos(z[2]), "dobliquity_dt_deg_per_myr", DEG_PER_MYR),
        (np.unwrap(np.arctan2(z[1], z[0])), "dazimuth_dt_deg_per_myr", DEG_PER_MYR),
    ):
        slope = np.polyfit(times, series, 1)[0]  # through the nutation, some 1e-6 rad
        assert slope * unit == pytest.approx(rates[key], rel=2e-3), key


def test_a_slow_precession_of_the_pole_adds_up_over_a_long_time():
    """The pole follows dL/dt = torque for torques that turn with it: integrated by the vector, and by the angles."""
    moment, omega = 2.0, 1.0
    parts = np.array([0.0, 2e-3, 5e-3])

    def frame(s):
        tilt, azimuth = np.arccos(s[2]), np.arctan2(s[1], s[0])
        up = np.array([np.cos(tilt) * np.cos(azimuth), np.cos(tilt) * np.sin(azimuth), -np.sin(tilt)])
        return tilt, azimuth, up, np.array([-np.sin(azimuth), np.cos(azimuth), 0.0])

    def by_vector(t, momentum):
        _, _, up, sideways = frame(momentum / np.linalg.norm(momentum))
        return parts[1] * up + parts[2] * sideways

    def by_angles(t, y):
        rates = spin_rates(parts, moment, omega, y[0])
        return [rates["dobliquity_dt_deg_per_myr"] / DEG_PER_MYR, rates["dazimuth_dt_deg_per_myr"] / DEG_PER_MYR]

    start = moment * omega * np.array([np.sin(0.3), 0, np.cos(0.3)])
    end = solve_ivp(by_vector, (0, 400), start, rtol=1e-11, atol=1e-13).y[:, -1]
    tilt, azimuth, _, _ = frame(end / np.linalg.norm(end))
    angles = solve_ivp(by_angles, (0, 400), [0.3, 0.0], rtol=1e-11, atol=1e-13).y[:, -1]
    assert angles == pytest.approx([tilt, azimuth], abs=1e-8)
    assert tilt == pytest.approx(0.3 + 400 * parts[1] / (moment * omega), abs=1e-8)


def test_the_published_form_of_the_obliquity_rate():
    """((tau.s) cos eps - tau.N)/(C omega sin eps) (Rubincam 2000, Icarus 148, 2)."""
    tilt, azimuth, moment, omega = 0.8, 0.4, 3.0, 2.0
    torque = np.array([0.2, -0.5, 0.9])
    pole = np.array([np.sin(tilt) * np.cos(azimuth), np.sin(tilt) * np.sin(azimuth), np.cos(tilt)])
    up = np.array([np.cos(tilt) * np.cos(azimuth), np.cos(tilt) * np.sin(azimuth), -np.sin(tilt)])
    published = (torque @ pole * np.cos(tilt) - torque[2]) / (moment * omega * np.sin(tilt))
    found = spin_rates(np.array([torque @ pole, torque @ up, 0.0]), moment, omega, tilt)
    assert found["dobliquity_dt_deg_per_myr"] == pytest.approx(published * DEG_PER_MYR, rel=1e-12)


@pytest.mark.parametrize("tilt", [0.0, np.pi])
def test_an_upright_pole_has_no_azimuth(tilt):
    found = spin_rates(np.array([1.0, 2.0, 3.0]), 4.0, 5.0, tilt)
    assert np.isnan(found["dazimuth_dt_deg_per_myr"])
    assert found["dobliquity_dt_deg_per_myr"] == pytest.approx(2 / 20 * DEG_PER_MYR)


def test_the_doubling_time_is_the_spin_rate_over_its_change():
    result = drift(body(), shape=lump())
    change = abs(result.spin.domega_dt_rad_per_d2.value) / DAY_S**2 * MYR_S
    assert result.spin.doubling_time_myr.value == pytest.approx(BODY.spin.rate / change, rel=1e-12)
    assert result.spin.doubling_time_myr.relative_error == pytest.approx(
        result.spin.domega_dt_rad_per_d2.relative_error
    )
