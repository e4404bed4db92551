"""The periodic lag solver: operators against exact half-derivatives, answers against the twins and in their limits."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_heat import naive_lag
from scipy.linalg import circulant

from smallbody.constants import AU_M, SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.heat import Ground, LagSolver, orbit_operator, rotation_weights
from smallbody.heat.lag import rate_of_change
from smallbody.heat.march import march_period
from smallbody.light import course, places_at, places_between, pole_vector, sun_on_body

RATE = 2 * np.pi / (4.3 * 3600)
EPS, ALBEDO = 0.9, 0.05
FACETS = 16


def one_place(a_au=1.0):
    return places_at(a_au * AU_M, 0.0, np.zeros(1), np.ones(1))


def even_places(a_m, e, count):
    return places_at(a_m, e, 2 * np.pi * np.arange(count) / count, np.full(count, 1 / count))


def latitudes(seed=1):
    """z of the normals and body longitudes of a few facets."""
    rng = np.random.default_rng(seed)
    return rng.uniform(-0.95, 0.95, FACETS), rng.uniform(0, 2 * np.pi, FACETS)


def light_on(sin_lat, cos_lat, sun_longitude, flux, facets):
    """Absorbed light of an open facet, W/m2; all but `facets` broadcast."""
    z, longitude = facets
    cosine = sin_lat * z + cos_lat * np.sqrt(1 - z * z) * np.cos(sun_longitude - longitude)
    return (1 - ALBEDO) * flux * np.maximum(cosine, 0.0)


def light_at(places, sun, nodes, facets):
    """Absorbed light (p, n, L), and the Sun's body longitude (n,), which falls with time."""
    turn = -2 * np.pi * np.arange(nodes) / nodes
    light = light_on(
        sun.sin_latitude[:, None, None], sun.cos_latitude[:, None, None], turn[None, :, None],
        places.flux_w_m2[:, None, None], facets,
    )  # fmt: skip
    return light, turn


def light_through_orbit(a_m, e, obliquity, azimuth, turns, steps, facets):
    """Absorbed light (n, L) at equal times of an orbit of so many turns, the body's longitude of the Sun (n,), its true
    anomaly (n,), the period and the spin rate: every step where Kepler puts it, nothing averaged."""
    n = turns * steps
    places = even_places(a_m, e, n)
    period = 2 * np.pi / places.mean_motion
    z = pole_vector(obliquity, azimuth)
    x = np.cross([0.0, 1.0, 0.0], z)
    x /= np.linalg.norm(x)
    y = np.cross(z, x)
    u = places.to_sun
    sin_lat = (u @ z)[:, None]
    cos_lat = np.sqrt(np.maximum(0, 1 - sin_lat**2))
    longitude = np.arctan2(u @ y, u @ x) - 2 * np.pi * turns * np.arange(n) / n
    light = light_on(sin_lat, cos_lat, longitude[:, None], places.flux_w_m2[:, None], facets)
    return light, longitude, places.true_anomaly, period, 2 * np.pi * turns / period


# --- the operator over a rotation ----------------------------------------------------------------------------------


@given(
    nodes=st.integers(8, 512).map(lambda k: 2 * k),
    gamma=st.floats(0.01, 10_000.0),
    rate=st.floats(1e-7, 1e-2),
)
@settings(max_examples=80, deadline=None)
def test_the_weights_form_an_m_matrix(nodes, gamma, rate):
    w = rotation_weights(nodes, gamma, rate)
    assert w[0] > 0
    assert np.all(w[1:] < 0)
    assert abs(w.sum()) < 1e-12 * w[0]


def half_derivative_error(nodes, harmonic):
    """Largest error of the conducted flux of a wave cos(k w t), relative to its amplitude."""
    w = rotation_weights(nodes, 1.0, RATE)
    angle = harmonic * 2 * np.pi * np.arange(nodes) / nodes
    flux = circulant(w) @ np.cos(angle)  # sum_k w[k] T[j - k]
    # the flux into a half-space leads its surface temperature by an eighth of a turn, and goes with the root of the
    # rate (Carslaw & Jaeger, Conduction of Heat in Solids, periodic surface temperature)
    size = np.sqrt(harmonic * RATE)
    return np.abs(flux - size * np.cos(angle + np.pi / 4)).max() / size


@pytest.mark.parametrize("harmonic", [1, 3])
def test_the_flux_of_a_wave_is_its_half_derivative_to_second_order(harmonic):
    errors = [half_derivative_error(n, harmonic) for n in (64, 128, 256, 512)]
    assert errors[0] < 2e-3 * harmonic**2
    np.testing.assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2.0, atol=0.1)


# --- the operator over the orbit -----------------------------------------------------------------------------------


@pytest.mark.parametrize(("e", "count"), [(0.0, 24), (0.2, 24), (0.6, 48), (0.9, 96)])
def test_a_constant_conducts_nothing_round_the_orbit(e, count):
    b = orbit_operator(places_between(AU_M, e, count))
    assert np.abs(b.sum(axis=1)).max() < 1e-12 * np.abs(b).max()


def season_error(places, harmonic, phase=0.7):
    b = orbit_operator(places)
    angle = harmonic * places.mean_anomaly + phase
    size = np.sqrt(harmonic * places.mean_motion)
    return np.abs(b @ np.cos(angle) - size * np.cos(angle + np.pi / 4)).max() / size


@pytest.mark.parametrize("harmonic", [1, 2, 3])
def test_a_wave_of_the_orbit_conducts_its_half_derivative(harmonic):
    places = even_places(AU_M, 0.0, 32)
    assert season_error(places, harmonic) < 3e-4 * harmonic**4


@pytest.mark.parametrize("e", [0.0, 0.2, 0.5, 0.8])
def test_more_places_make_the_half_derivative_better_at_any_eccentricity(e):
    errors = [season_error(places_between(AU_M, e, p), 1) for p in (24, 48, 96)]
    assert errors[1] < errors[0] / 6
    assert errors[2] < errors[1] / 6


def test_the_half_derivative_of_a_flash_at_perihelion_is_found_where_places_are_dense():
    # any smooth function of the eccentric anomaly is a Fourier series in the mean anomaly: differentiate that instead
    e, fine = 0.6, 1 << 14
    places = places_between(AU_M, e, 64)

    def warmth(ecc):
        return 1 / np.sqrt(1 - e * np.cos(ecc))  # as r^-1/2, which a body in equilibrium follows

    grid = even_places(AU_M, e, fine)
    modes = np.fft.fft(warmth(grid.eccentric_anomaly)) / fine
    k = np.fft.fftfreq(fine, 1 / fine)
    half = np.exp(1j * np.outer(places.mean_anomaly, k)) @ (modes * np.sqrt(1j * k * places.mean_motion))
    error = orbit_operator(places) @ warmth(places.eccentric_anomaly) - half.real
    assert np.abs(error).max() < 1e-4 * np.abs(half).max()


# --- the naive twin ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("count", "nodes"), [(1, 16), (1, 22), (1, 15), (1, 13), (4, 16), (5, 19)])
@pytest.mark.parametrize("gamma", [0.5, 100.0, 4000.0])
def test_the_solver_agrees_with_its_twin(count, nodes, gamma):
    places = one_place() if count == 1 else places_between(AU_M, 0.1, count)
    sun = sun_on_body(places, 0.6, 0.3)
    light, _ = light_at(places, sun, nodes, latitudes(count))
    rates = np.full(count, RATE)
    solver = LagSolver(Ground(EPS, gamma), places, nodes, rates)
    t, means = solver.solve(light)
    weights = np.array([rotation_weights(nodes, gamma, r) for r in rates])
    season = orbit_operator(places)
    for lane in (0, 5, FACETS - 1):
        twin = naive_lag(light[:, :, lane], weights, season, EPS * SIGMA, gamma)
        np.testing.assert_allclose(t[:, :, lane], twin, rtol=0, atol=5e-3)
        np.testing.assert_allclose(means[:, lane], twin.mean(axis=1), rtol=0, atol=2e-3)


def test_the_excess_is_what_is_emitted_beyond_what_is_absorbed():
    places = places_between(AU_M, 0.1, 6)
    light, turn = light_at(places, sun_on_body(places, 0.6, 0.3), 32, latitudes())
    solver = LagSolver(Ground(EPS, 200.0), places, 32, np.full(6, RATE))
    t, _ = solver.solve(light)
    beyond = EPS * SIGMA * t**4 - light
    plain = [(beyond * f[None, :, None]).mean(axis=1) for f in (np.ones(32), np.cos(turn), np.sin(turn))]
    np.testing.assert_allclose(solver.excess(t, light), plain, rtol=0, atol=1e-10)


# --- limits and laws -----------------------------------------------------------------------------------------------


def test_without_inertia_every_node_is_in_equilibrium():
    places = places_between(AU_M, 0.3, 12)
    light, _ = light_at(places, sun_on_body(places, 1.0, 0.3), 32, latitudes())
    t, _ = LagSolver(Ground(EPS, 0.0), places, 32, np.full(12, RATE)).solve(light)
    np.testing.assert_allclose(EPS * SIGMA * t**4, light, rtol=1e-6, atol=1e-9)


def test_endless_inertia_keeps_each_facet_at_one_temperature():
    places = places_between(AU_M, 0.0, 24)
    light, _ = light_at(places, sun_on_body(places, 0.8, 0.0), 64, latitudes())
    t, _ = LagSolver(Ground(EPS, 1e8), places, 64, np.full(24, RATE)).solve(light)
    mean = np.einsum("p,pnl->l", places.weight, light) / 64
    assert np.abs(t - (mean / (EPS * SIGMA)) ** 0.25).max() < 0.02


@pytest.mark.parametrize("gamma", [1.0, 200.0, 3000.0])
def test_a_day_without_seasons_emits_what_it_absorbs(gamma):
    light, _ = light_at(one_place(), sun_on_body(one_place(), 0.4, 0.0), 64, latitudes())
    t, _ = LagSolver(Ground(EPS, gamma), one_place(), 64, np.array([RATE])).solve(light)
    np.testing.assert_allclose((EPS * SIGMA * t**4).mean(axis=1), light.mean(axis=1), rtol=1e-6)


@pytest.mark.parametrize(("e", "count"), [(0.0, 24), (0.4, 32), (0.8, 96)])
@pytest.mark.parametrize("gamma", [20.0, 1500.0])
def test_an_orbit_emits_what_it_absorbs(e, count, gamma):
    places = places_between(1.2 * AU_M, e, count)
    light, _ = light_at(places, sun_on_body(places, 1.2, 0.5), 64, latitudes())
    t, _ = LagSolver(Ground(EPS, gamma), places, 64, np.full(count, RATE)).solve(light)
    emitted, absorbed = (np.einsum("p,pnl->l", places.weight, x) for x in (EPS * SIGMA * t**4, light))
    np.testing.assert_allclose(emitted, absorbed, rtol=2e-3)
    assert abs(emitted.sum() / absorbed.sum() - 1) < 2e-4


@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    gamma=st.one_of(st.just(0.0), st.floats(0.01, 10_000.0)),
    nodes=st.integers(8, 40).map(lambda k: 2 * k),
    hours=st.floats(0.1, 1000.0),
)
def test_temperatures_are_never_negative_and_always_balance(seed, gamma, nodes, hours):
    rng = np.random.default_rng(seed)
    light = rng.uniform(0, 1.0, (1, nodes, FACETS)) ** 4 * 10.0 ** rng.uniform(-1, 4, FACETS)
    light *= rng.uniform(size=light.shape) < rng.uniform(0.05, 1.0, FACETS)  # with dark stretches
    t, means = LagSolver(Ground(EPS, gamma), one_place(), nodes, np.array([2 * np.pi / (hours * 3600)])).solve(light)
    assert np.all(np.isfinite(t))
    assert np.all(t >= 0)
    np.testing.assert_allclose((EPS * SIGMA * t**4).mean(axis=1), light.mean(axis=1), rtol=1e-3, atol=1e-9)
    np.testing.assert_allclose(means, t.mean(axis=1), atol=1e-6)


def test_turning_the_clock_turns_the_answer():
    light, _ = light_at(one_place(), sun_on_body(one_place(), 0.4, 0.0), 64, latitudes())
    solver = LagSolver(Ground(EPS, 200.0), one_place(), 64, np.array([RATE]))
    t, turned = solver.solve(light)[0], solver.solve(np.roll(light, 17, axis=1))[0]
    np.testing.assert_allclose(np.roll(t, 17, axis=1), turned, rtol=0, atol=5e-3)


def test_facets_alone_or_in_company_have_the_same_temperature():
    light, _ = light_at(one_place(), sun_on_body(one_place(), 0.4, 0.0), 64, latitudes())
    solver = LagSolver(Ground(EPS, 200.0), one_place(), 64, np.array([RATE]))
    whole, few = solver.solve(light)[0], solver.solve(light[:, :, :3])[0]
    assert few.shape == (1, 64, 3)
    np.testing.assert_allclose(whole[:, :, :3], few, rtol=0, atol=5e-3)


# --- two unlike roads ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("gamma", [5.0, 200.0, 2000.0])
def test_a_day_by_lag_and_by_marching_differs_only_by_the_grid(gamma):
    # both step with the same formula in time: what is left between them is the depth grid, 5e-4 in phase at most
    light, _ = light_at(one_place(), sun_on_body(one_place(), 0.3, 0.2), 64, latitudes())
    t, _ = LagSolver(Ground(EPS, gamma), one_place(), 64, np.array([RATE])).solve(light)
    marched = march_period(Ground(EPS, gamma), 2 * np.pi / RATE, light[0], first_cell=0.005, tol_k=1e-5)
    np.testing.assert_allclose(t[0], marched, rtol=0, atol=0.02)


@pytest.mark.parametrize("gamma", [20.0, 200.0, 2000.0])
def test_64_nodes_give_the_first_harmonic_of_a_much_finer_march_to_three_in_a_thousand(gamma):
    light, turn = light_at(one_place(), sun_on_body(one_place(), 0.3, 0.2), 64, latitudes())
    solver = LagSolver(Ground(EPS, gamma), one_place(), 64, np.array([RATE]))
    t, _ = solver.solve(light)
    fine, fine_turn = light_at(one_place(), sun_on_body(one_place(), 0.3, 0.2), 2048, latitudes())
    marched = march_period(Ground(EPS, gamma), 2 * np.pi / RATE, fine[0], first_cell=0.005, tol_k=1e-5)
    # the part of the first harmonic that lags behind the light, which makes the transverse push
    lag = (EPS * SIGMA * t[0] ** 4 - light[0]).T @ np.exp(1j * turn) / 64
    true = (EPS * SIGMA * marched**4 - fine[0]).T @ np.exp(1j * fine_turn) / 2048
    assert np.abs(lag - true).max() < 3e-3 * np.abs(true).max()
    assert abs(lag.sum().imag / true.sum().imag - 1) < 3e-3


def harmonics_by_lag(a_m, e, obliquity, azimuth, ground, spin, count, nodes, facets):
    places = places_between(a_m, e, count)
    sun = sun_on_body(places, obliquity, azimuth)
    light, turn = light_at(places, sun, nodes, facets)
    t, _ = LagSolver(ground, places, nodes, spin - sun.ascension_rate).solve(light)
    emitted = ground.emissivity * SIGMA * t**4
    daily = np.einsum("p,pnl,n->l", places.weight, emitted, np.exp(1j * turn)) / nodes
    yearly = np.einsum("p,pnl,p->l", places.weight, emitted, np.exp(1j * places.true_anomaly)) / nodes
    return daily, yearly


def harmonics_by_march(a_m, e, obliquity, azimuth, ground, turns, steps, facets):
    light, longitude, anomaly, period, spin = light_through_orbit(a_m, e, obliquity, azimuth, turns, steps, facets)
    t = march_period(ground, period, light, fast_rate=spin)
    emitted = ground.emissivity * SIGMA * t**4
    return (emitted * np.exp(1j * longitude)[:, None]).mean(0), (emitted * np.exp(1j * anomaly)[:, None]).mean(0), spin


@pytest.mark.parametrize(
    ("e", "obliquity_deg", "gamma", "turns"), [(0.4, 60.0, 200.0, 100), (0.1, 150.0, 60.0, 150), (0.0, 0.0, 500.0, 100)]
)
def test_two_clocks_by_lag_and_by_marching_through_the_orbit(e, obliquity_deg, gamma, turns):
    case = (1.1 * AU_M, e, np.radians(obliquity_deg), 0.3, Ground(EPS, gamma))
    facets = latitudes()
    daily, yearly, spin = harmonics_by_march(*case, turns, 192, facets)
    lag_daily, lag_yearly = harmonics_by_lag(*case, spin, 32, 64, facets)
    assert np.abs(lag_daily - daily).max() < 1.5e-3 * np.abs(daily).max()
    assert np.abs(lag_yearly - yearly).max() < 1e-3 * max(np.abs(yearly).max(), 0.01 * np.abs(daily).max())
    # summed over facets, the part that pushes along the orbit, in the body's frame
    assert abs(lag_daily.sum().imag / daily.sum().imag - 1) < 2e-3


def test_a_body_that_lies_on_its_side_keeps_its_seasons():
    # all of the mean push is seasonal here: the yearly harmonic is what counts
    case = (1.1 * AU_M, 0.0, np.radians(90.0), 0.3, Ground(EPS, 1500.0))
    facets = latitudes()
    _, yearly, spin = harmonics_by_march(*case, 100, 192, facets)
    _, lag_yearly = harmonics_by_lag(*case, spin, 32, 64, facets)
    lagging = yearly * np.exp(-0.3j)
    assert np.abs(lag_yearly - yearly).max() < 1e-3 * np.abs(yearly).max()
    assert np.abs((lag_yearly * np.exp(-0.3j) - lagging).imag).max() < 1e-3 * np.abs(lagging.imag).max()


# --- errors --------------------------------------------------------------------------------------------------------


def test_tables_that_do_not_belong_together_are_named():
    with pytest.raises(SizeMismatch, match="2 rates for 1 places"):
        LagSolver(Ground(EPS, 200.0), one_place(), 16, np.array([RATE, RATE]))
    solver = LagSolver(Ground(EPS, 200.0), one_place(), 16, np.array([RATE]))
    with pytest.raises(SizeMismatch, match="2 places by 16 nodes"):
        solver.solve(np.ones((2, 16, 4)))


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_light_that_is_not_a_number_does_not_pass_for_an_answer(bad):
    light = np.full((1, 16, 4), 300.0)
    light[0, 5, 2] = bad
    with pytest.raises((NotSettled, ValueError)):
        LagSolver(Ground(EPS, 200.0), one_place(), 16, np.array([RATE])).solve(light)


def test_a_spline_through_the_places_tells_how_fast_things_change():
    places = places_between(AU_M, 0.3, 48)
    found = rate_of_change(places) @ np.sin(2 * places.mean_anomaly + 0.3)
    plain = 2 * places.mean_motion * np.cos(2 * places.mean_anomaly + 0.3)
    np.testing.assert_allclose(found, plain, rtol=0, atol=5e-4 * places.mean_motion)


@pytest.mark.parametrize(("tilt", "most", "gain"), [(np.pi / 2, 5e-3, 2.0), (0.9, 3e-3, 1.0)])
def test_days_that_change_from_place_to_place_are_followed(tilt, most, gain):
    # 60 rotations an orbit: the first harmonic of the heat against marching through the whole orbit
    rotations, nodes, steps = 60, 128, 192
    places = places_between(AU_M, 0.4, 48)
    sun = sun_on_body(places, tilt, 0.7)
    spin = rotations * places.mean_motion
    up = np.sin(np.linspace(-1.2, 1.2, 16))
    upright = abs(np.cos(tilt)) >= 0.5
    rates = spin - sun.ascension_rate if upright else np.full(len(places), spin)
    ahead = np.zeros(len(places)) if upright else sun.ascension
    ground = Ground(EPS, 200.0)
    hour = 2 * np.pi * np.arange(nodes)[None, :, None] / nodes
    mu = sun.sin_latitude[:, None, None] * up + sun.cos_latitude[:, None, None] * np.sqrt(1 - up**2) * np.cos(hour)
    light = places.flux_w_m2[:, None, None] * np.maximum(mu, 0.0)
    way = course(AU_M, 0.4, tilt, 0.7, 1, rotations, rotations * steps)
    high = np.sqrt(1 - way.sin_latitude**2)[:, None]
    mu = way.sin_latitude[:, None] * up + high * np.sqrt(1 - up**2) * np.cos(2 * np.pi * way.turns)[:, None]
    slow = way.places.flux_w_m2[:, None] * np.maximum(mu, 0.0)
    t = march_period(ground, way.period_s, slow, fast_rate=way.rate)
    # the push along a direction that stays in the sky, as the Sun comes and goes: what drifts an orbit
    turned = np.exp(-2j * np.pi * rotations * np.arange(len(slow)) / len(slow)) * np.cos(way.places.true_anomaly)
    true = ((EPS * SIGMA * t**4 - slow) * turned[:, None]).mean(axis=0)
    # the course counts rotations from where its own axes stood at the start
    offset = sun.ascension[0] - 2 * np.pi * way.turns[0]
    wrong = []
    for followed in (ahead, None):
        solver = LagSolver(ground, places, nodes, rates, followed)
        t, _ = solver.solve(light)
        x = solver.excess(t, light)
        pushed = np.exp(-1j * (sun.ascension - offset)) * np.cos(places.true_anomaly) * places.weight
        wrong.append(np.abs(pushed @ (x[1] + 1j * x[2]) - true).max() / np.abs(true).max())
    assert wrong[0] < most
    assert wrong[1] > gain * wrong[0], wrong
    assert wrong[0] < most
