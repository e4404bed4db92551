"""Slow rotators, solved as one long period: against the marching twin and in the limits."""

import numpy as np
import pytest
from test_heat_lag import EPS, latitudes, light_through_orbit

from smallbody.constants import AU_M, SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.heat import Ground, lag_period, march_period


@pytest.mark.parametrize(
    ("turns", "e", "obliquity_deg", "gamma"),
    [(2, 0.3, 40.0, 50.0), (7, 0.7, 100.0, 400.0), (23, 0.1, 170.0, 5.0), (45, 0.2, 20.0, 3000.0)],
)
def test_a_slow_rotator_by_lag_and_by_marching(turns, e, obliquity_deg, gamma):
    light, longitude, _, period, spin = light_through_orbit(
        1.3 * AU_M, e, np.radians(obliquity_deg), 0.3, turns, 96, latitudes()
    )
    lag = lag_period(Ground(EPS, gamma), period, light)
    march = march_period(Ground(EPS, gamma), period, light, fast_rate=spin, first_cell=0.005)
    # both step with the same formula in time, so that only the depth grid is between them
    daily = [(t**4 * np.exp(1j * longitude)[:, None]).mean(axis=0) for t in (lag, march)]
    assert np.abs(daily[0] - daily[1]).max() < 1e-4 * np.abs(daily[1]).max()
    assert np.abs(lag - march).max() < 0.2  # K, where the Sun rises


def test_a_long_period_emits_what_it_absorbs():
    light, *_, period, _ = light_through_orbit(1.3 * AU_M, 0.4, 0.5, 0.3, 10, 96, latitudes())
    t = lag_period(Ground(EPS, 200.0), period, light)
    np.testing.assert_allclose((EPS * SIGMA * t**4).mean(axis=0), light.mean(axis=0), rtol=1e-5)


def test_a_long_period_without_inertia_is_in_equilibrium():
    light, *_, period, _ = light_through_orbit(1.3 * AU_M, 0.4, 0.5, 0.3, 3, 96, latitudes())
    np.testing.assert_allclose(EPS * SIGMA * lag_period(Ground(EPS, 0.0), period, light) ** 4, light, atol=1e-10)


def test_facets_of_a_long_period_are_solved_block_by_block():
    z, longitude = latitudes()
    light, *_, period, _ = light_through_orbit(1.3 * AU_M, 0.4, 0.5, 0.3, 3, 96, (np.tile(z, 3), np.tile(longitude, 3)))
    t = lag_period(Ground(EPS, 200.0), period, light[:, :37])
    assert t.shape == (288, 37)
    np.testing.assert_allclose(t[:, 16:32], t[:, :16], rtol=0, atol=0.02)


def test_a_long_period_of_too_few_steps_or_of_broken_light_is_refused():
    with pytest.raises(SizeMismatch, match="at least 8 steps"):
        lag_period(Ground(EPS, 200.0), 1e6, np.ones((4, 2)))
    with pytest.raises((NotSettled, ValueError)):
        lag_period(Ground(EPS, 200.0), 1e6, np.full((64, 2), np.nan))
