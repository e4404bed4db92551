"""The marching twin against a half-space on paper, against its own naive twin, and in its limits."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_heat import naive_average, naive_march

from smallbody.constants import SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.heat import Ground, march
from smallbody.heat._lanes import LANES
from smallbody.heat._march import _average, _eliminate, _march
from smallbody.heat.march import DepthGrid, depth_grid, march_period

HOUR = 3600.0
PERIOD = 5.0 * HOUR
RATE = 2 * np.pi / PERIOD


def sunny(n, facets, seed=0):
    """Light of a day without seasons on facets of random latitude and longitude, W/m2."""
    rng = np.random.default_rng(seed)
    turn = 2 * np.pi * np.arange(n)[:, None] / n
    return 1300.0 * rng.uniform(0.2, 1, facets) * np.maximum(0.0, np.cos(turn - rng.uniform(0, 2 * np.pi, facets)))


# --- the grid ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("growth", "error"), [(1.08, 1e-6), (1.25, 2e-6), (1.4, 5e-6), (1.5, 2e-5)])
def test_slow_waves_find_the_grid_a_half_space(growth, error):
    # a half-space admits the flux Gamma sqrt(i omega) T (Carslaw & Jaeger, Conduction of Heat in Solids, periodic
    # surface temperature). The finest cell is tiny here, so that what is left is what the growth costs.
    grid = depth_grid(1e-3, growth, 7 * np.sqrt(2 / 1e-3))
    rate = np.geomspace(1e-3, 1.0, 40)
    assert np.abs(grid.admittance(rate) / np.sqrt(1j * rate) - 1).max() < error


@pytest.mark.parametrize("growth", [1.08, 1.25])
def test_faces_half_way_in_depth_would_be_wrong_by_the_square_of_the_growth(growth):
    good = depth_grid(1e-3, growth, 7 * np.sqrt(2 / 1e-3))
    faces = np.concatenate([[0.0], 0.5 * (good.node[1:] + good.node[:-1]), good.node[-1:]])
    plain = DepthGrid(good.node, np.diff(faces))
    rate = np.geomspace(1e-3, 1e-1, 20)
    excess = np.abs(plain.admittance(rate) / np.sqrt(1j * rate)) - 1
    np.testing.assert_allclose(excess, np.log(growth) ** 2 / 16, rtol=0.05)


def test_the_first_cell_costs_the_square_of_its_size():
    fast = 1.0
    errors = [abs(depth_grid(h, 1.2, 100.0).admittance(fast) / np.sqrt(1j * fast) - 1) for h in (0.2, 0.1, 0.05, 0.025)]
    np.testing.assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2.0, atol=0.12)


def test_cells_fill_the_depth_without_gap_or_overlap():
    grid = depth_grid(0.1, 1.3, 50.0)
    assert grid.node[0] == 0.0
    assert grid.node[-1] >= 50.0
    assert np.all(grid.width > 0)
    assert grid.width.sum() == pytest.approx(grid.node[-1], rel=1e-14)


# --- kernels and twins ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize("n", [1, 2, 37, 60])
@pytest.mark.parametrize("gamma", [0.5, 200.0, 5000.0])
def test_the_kernel_marches_like_its_twin(n, gamma):
    rng = np.random.default_rng(n)
    es, dt = 0.9 * SIGMA, 300.0
    grid = depth_grid(12.0, 1.3, 600.0)
    light = rng.uniform(0, 1300, (n, LANES)) * (rng.uniform(size=(n, LANES)) < 0.6)  # night falls and ends abruptly
    state = rng.uniform(150, 300, (2, len(grid.node), LANES))
    state[0] = state[1] + rng.uniform(-2, 2, state[1].shape)
    first = state.copy()
    rows, sums, out = np.empty((4, len(grid.node))), np.full((4, LANES), np.nan), np.zeros((n, LANES))
    light.flags.writeable = False
    _eliminate(grid.gaps, grid.width, gamma, dt, rows)
    _march(light, es, rows, state, sums, out)
    for lane in (0, 7, LANES - 1):
        surface, before, now = naive_march(
            light[:, lane], es, gamma, dt, grid.gaps, grid.width, first[0, :, lane], first[1, :, lane]
        )
        np.testing.assert_allclose(out[:, lane], surface, rtol=0, atol=1e-7)
        np.testing.assert_allclose(state[0, :, lane], before, rtol=0, atol=1e-7)
        np.testing.assert_allclose(state[1, :, lane], now, rtol=0, atol=1e-7)
    np.testing.assert_allclose(sums[0], out.mean(axis=0), rtol=1e-13)
    np.testing.assert_allclose(sums[1], (out**3).mean(axis=0), rtol=1e-13)
    np.testing.assert_allclose(sums[2], (out**4).mean(axis=0), rtol=1e-13)
    np.testing.assert_allclose(sums[3], out.max(axis=0), rtol=1e-13)  # out held zeros before


@pytest.mark.parametrize(("n", "parts"), [(64, 16), (100, 24), (97, 20), (30, 30)])
def test_coarse_light_is_the_mean_of_its_part(n, parts):
    light = np.random.default_rng(n).uniform(0, 1000, (n, LANES))
    out = np.full((parts, LANES), np.nan)
    _average(light, out)
    for lane in (0, LANES - 1):
        np.testing.assert_allclose(out[:, lane], naive_average(light[:, lane], parts), atol=0.3)
    np.testing.assert_allclose(out.mean(axis=0), light.mean(axis=0), rtol=1e-13)  # no energy is lost


def test_a_period_of_the_interface_is_a_period_of_the_twin():
    n, gamma, es = 24, 150.0, 0.9 * SIGMA
    light = sunny(n, 1)
    t = march_period(Ground(0.9, gamma), PERIOD, light, first_cell=0.3, growth=1.4, depth_skins=4.0, tol_k=1e-9)
    grid = depth_grid(0.3 * np.sqrt(2 / RATE), 1.4, 4.0 * np.sqrt(2 / RATE))
    now = np.full(len(grid.node), t.mean())
    before = now.copy()
    for _ in range(400):
        surface, before, now = naive_march(light[:, 0], es, gamma, PERIOD / n, grid.gaps, grid.width, before, now)
    np.testing.assert_allclose(t[:, 0], surface, rtol=0, atol=1e-5)


# --- a half-space on paper -----------------------------------------------------------------------------------------


def linear_response_error(n, first_cell, gamma=120.0):
    """Relative error of the surface wave that a small ripple of the light makes.

    Half-space under q0 + q1 cos(wt), small q1: T1 = q1/(4 eps sigma T0^3 + Gamma sqrt(w) e^{i pi/4}) (Carslaw & Jaeger,
    Conduction of Heat in Solids, periodic surface temperature, with the radiation made linear).
    """
    eps, q0, q1 = 0.9, 400.0, 0.5
    turn = 2 * np.pi * np.arange(n) / n
    t = march_period(
        Ground(eps, gamma), PERIOD, (q0 + q1 * np.cos(turn))[:, None], first_cell=first_cell, growth=1.2, tol_k=1e-10
    )[:, 0]
    t0 = (q0 / (eps * SIGMA)) ** 0.25
    exact = q1 / (4 * eps * SIGMA * t0**3 + gamma * np.sqrt(RATE) * np.exp(0.25j * np.pi))
    return abs(2 * np.mean(t * np.exp(-1j * turn)) / exact - 1)


def test_a_ripple_of_the_light_makes_the_wave_of_carslaw_and_jaeger():
    assert linear_response_error(1024, 0.01) < 3e-5


def test_the_error_falls_with_the_square_of_the_time_step():
    errors = [linear_response_error(n, 0.004) for n in (24, 48, 96, 192)]
    assert errors[2] < 1e-3
    np.testing.assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2.0, atol=0.15)


def test_the_error_falls_with_the_square_of_the_first_cell():
    errors = [linear_response_error(4096, h) for h in (0.4, 0.2, 0.1)]
    np.testing.assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2.0, atol=0.15)


# --- limits and laws -----------------------------------------------------------------------------------------------


def test_without_inertia_ground_is_in_equilibrium():
    light = sunny(96, 5)
    t = march_period(Ground(0.9, 0.0), PERIOD, light)
    np.testing.assert_allclose(0.9 * SIGMA * t**4, light, rtol=1e-12, atol=1e-12)


def test_as_inertia_fades_so_does_the_distance_from_equilibrium():
    light = sunny(192, 3) + 50.0
    off = [
        np.abs(march_period(Ground(0.9, gamma), PERIOD, light, tol_k=1e-6) - (light / (0.9 * SIGMA)) ** 0.25).max()
        for gamma in (0.1, 0.01, 0.001)
    ]
    np.testing.assert_allclose(np.divide(off[:-1], off[1:]), 10.0, rtol=0.02)
    assert off[-1] < 0.01


def test_endless_inertia_keeps_one_temperature():
    light = sunny(96, 3)
    t = march_period(Ground(0.9, 1e7), PERIOD, light, tol_k=1e-6)
    np.testing.assert_allclose(t, np.broadcast_to((light.mean(0) / (0.9 * SIGMA)) ** 0.25, t.shape), atol=0.02)


@pytest.mark.parametrize("gamma", [1.0, 50.0, 2000.0])
def test_what_is_absorbed_is_emitted(gamma):
    light = sunny(96, 20)
    t = march_period(Ground(0.8, gamma), PERIOD, light, tol_k=1e-6)
    np.testing.assert_allclose((0.8 * SIGMA * t**4).mean(axis=0), light.mean(axis=0), rtol=1e-8)


def test_the_default_tolerance_balances_energy_too():
    light = sunny(96, 20)
    t = march_period(Ground(0.8, 200.0), PERIOD, light)
    np.testing.assert_allclose((0.8 * SIGMA * t**4).mean(axis=0), light.mean(axis=0), rtol=1e-5)


def test_an_orbit_of_like_days_is_a_day():
    day = sunny(96, 4)
    ground = Ground(0.9, 300.0)
    orbit = march_period(ground, 30 * PERIOD, np.tile(day, (30, 1)), fast_rate=RATE, tol_k=1e-5)
    np.testing.assert_allclose(orbit[-96:], march_period(ground, PERIOD, day, tol_k=1e-6), rtol=0, atol=5e-4)


def test_a_wave_of_the_orbit_goes_as_deep_as_it_should():
    # the same linear response as above, at the slow clock of an orbit of 200 rotations, on a grid that resolves both
    n, turns, gamma, q0, q1 = 4000, 200, 800.0, 400.0, 0.5
    slow = RATE / turns
    turn = 2 * np.pi * np.arange(n) / n
    t = march_period(Ground(1.0, gamma), turns * PERIOD, (q0 + q1 * np.cos(turn))[:, None], fast_rate=RATE, tol_k=1e-9)[
        :, 0
    ]
    t0 = (q0 / SIGMA) ** 0.25
    exact = q1 / (4 * SIGMA * t0**3 + gamma * np.sqrt(slow) * np.exp(0.25j * np.pi))
    assert abs(2 * np.mean(t * np.exp(-1j * turn)) / exact - 1) < 1e-5


@pytest.mark.parametrize("facets", [1, 16, 17, 40])
def test_a_facet_does_not_feel_its_neighbours_in_the_block(facets):
    light = sunny(48, 40)
    ground = Ground(0.9, 200.0)
    whole = march_period(ground, PERIOD, light, tol_k=1e-8)
    some = march_period(ground, PERIOD, light[:, :facets], tol_k=1e-8)
    np.testing.assert_allclose(some, whole[:, :facets], rtol=0, atol=1e-7)


def test_threads_do_not_change_the_answer():
    light = sunny(48, 40)
    one, two = (march_period(Ground(0.9, 200.0), PERIOD, light, threads=k) for k in (1, 2))
    np.testing.assert_array_equal(one, two)


def test_a_steady_tolerance_bounds_what_is_left():
    light = sunny(96, 16)
    best = march_period(Ground(0.9, 200.0), PERIOD, light, tol_k=1e-9)
    assert np.abs(march_period(Ground(0.9, 200.0), PERIOD, light, tol_k=1e-2) - best).max() < 1e-2


def test_the_meter_counts_facets():
    class Counter:
        total = seen = 0

        def start(self, task, total):
            self.total = total

        def step(self, n=1):
            self.seen += n

        def stop(self):
            self.total, self.seen = -self.total, -self.seen

    counter = Counter()
    march_period(Ground(0.9, 200.0), PERIOD, sunny(48, 20), meter=counter)
    assert (counter.total, counter.seen) == (-20, -20)


@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    gamma=st.one_of(st.just(0.0), st.floats(0.01, 10_000.0)),
    n=st.integers(16, 130),
    hours=st.floats(0.1, 1000.0),
)
def test_temperatures_are_never_negative_and_always_balance(seed, gamma, n, hours):
    rng = np.random.default_rng(seed)
    light = rng.uniform(0, 1.0, (n, 3)) ** 4 * 10.0 ** rng.uniform(-3, 5, 3)  # from beyond Neptune to inside Mercury
    light *= rng.uniform(size=(n, 3)) < rng.uniform(0.05, 1.0, 3)  # with dark stretches
    t = march_period(Ground(0.9, gamma), hours * HOUR, light, tol_k=1e-4)
    assert np.all(np.isfinite(t))
    assert np.all(t >= 0)
    np.testing.assert_allclose((0.9 * SIGMA * t**4).mean(axis=0), light.mean(axis=0), rtol=2e-4, atol=1e-12)


# --- errors --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        ({"absorbed_w_m2": np.full(48, 1.0)}, SizeMismatch, "steps by facets"),
        ({"absorbed_w_m2": np.ones((48, 0))}, SizeMismatch, "steps by facets"),
        ({"absorbed_w_m2": np.ones((12, 1))}, SizeMismatch, "12 steps"),
        ({"absorbed_w_m2": np.array([[1.0]] * 20 + [[np.nan]] * 20)}, ValueError, "nan at step 20 of facet 0"),
        ({"absorbed_w_m2": np.array([[1.0, 2.0]] * 20 + [[1.0, -3.0]] * 20)}, ValueError, "-3 at step 20 of facet 1"),
        ({"absorbed_w_m2": np.array([[np.inf]] * 20)}, ValueError, "inf at step 0"),
        ({"fast_rate": 0.1 * RATE}, ValueError, "slower than the period"),
        ({"fast_rate": 20 * RATE}, SizeMismatch, "48 steps in a period of 20 turns"),
        ({"fast_rate": np.nan}, ValueError, "fast_rate"),
        ({"period_s": -1.0}, ValueError, "period_s is -1"),
        ({"period_s": np.inf}, ValueError, "period_s is inf"),
        ({"growth": 1.0}, ValueError, "growth is 1"),
        ({"first_cell": 0.0}, ValueError, "first_cell is 0"),
        ({"tol_k": np.nan}, ValueError, "tol_k is nan"),
        ({"depth_skins": 0.0}, ValueError, "depth_skins is 0"),
    ],
)
def test_wrong_input_is_named(change, error, words):
    good = {"ground": Ground(0.9, 200.0), "period_s": PERIOD, "absorbed_w_m2": np.ones((48, 2))}
    with pytest.raises(error, match=words):
        march_period(**(good | change))


def test_periods_that_never_agree_are_reported_with_the_best_there_is(monkeypatch):
    monkeypatch.setattr(march, "MOST_PERIODS", 2)
    with pytest.raises(NotSettled, match="still differ by") as caught:
        march_period(Ground(0.9, 200.0), PERIOD, sunny(96, 2), tol_k=1e-13)
    assert caught.value.details["temperature_k"].shape[0] == 96
    assert caught.value.details["worst_k"] > 1e-13
