"""The Sun over a slowly turning body: whole rotations, directions against a direct rotation, light against its twin."""

import naive_light as naive
import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.spatial.transform import Rotation

from smallbody.constants import AU_M, GM_SUN
from smallbody.light import course, horizons_of, lit_on_course, no_shadows, sun_on_body, whole_rotations
from smallbody.light.course import MOST_ORBITS, NEAR_ENOUGH

A_M = 1.3 * AU_M


@pytest.mark.parametrize(
    ("rotations_per_orbit", "found"),
    [(1.0, (1, 1)), (37.0, (1, 37)), (2.5, (2, 5)), (4 / 3, (3, 4)), (7.25, (4, 29)), (1.5001, (2, 3)), (0.25, (4, 1))],
)
def test_a_period_that_holds_whole_rotations_is_found(rotations_per_orbit, found):
    # (2, 3): Mercury's state, three rotations in two orbits
    assert whole_rotations(rotations_per_orbit) == found


@settings(max_examples=300, deadline=None)
@given(st.floats(0.02, 60.0), st.integers(1, 8))
@example(0.3, 4)
def test_the_period_is_the_shortest_that_is_near_enough_else_the_nearest(rate, most):
    orbits, rotations = whole_rotations(rate, most)
    assert 1 <= orbits <= most
    assert rotations >= 1
    assert np.gcd(orbits, rotations) == 1
    off = {n: min(abs(r / n / rate - 1) for r in range(1, int(rate * n) + 3)) for n in range(1, most + 1)}
    near = [n for n in off if off[n] < NEAR_ENOUGH]
    mine = abs(rotations / orbits / rate - 1)
    if near:
        assert orbits <= near[0]
        assert mine < NEAR_ENOUGH
    else:
        assert mine <= min(off.values()) + 1e-12


def test_the_rotations_in_an_orbit_change_by_an_eighth_at_most():
    for rate in np.linspace(1, 60, 5001):
        orbits, rotations = whole_rotations(rate, MOST_ORBITS)
        assert abs(rotations / orbits - rate) <= max(NEAR_ENOUGH * rate, 1 / (2 * MOST_ORBITS) + 1e-12)


CASES = [(0.0, 0.0, 0.0), (0.3, 0.6, 1.1), (0.6, np.pi / 2, 0.0), (0.2, np.pi / 2, np.pi / 2), (0.4, 2.5, -2.0)]


@pytest.mark.parametrize(("e", "obliquity", "azimuth"), CASES)
def test_the_suns_directions_agree_with_turning_the_body_step_by_step(e, obliquity, azimuth):
    orbits, rotations, steps = 2, 3, 50
    way = course(A_M, e, obliquity, azimuth, orbits, rotations, steps)
    pole = Rotation.from_euler("ZY", [azimuth, obliquity]).apply([0.0, 0.0, 1.0])
    first = way.frame[0]
    assert_allclose(first[2], pole, rtol=0, atol=4e-15)
    assert_allclose(np.cross(first[0], first[1]), pole, rtol=0, atol=4e-15)
    for k in range(steps):
        turn = Rotation.from_rotvec(pole * (2 * np.pi * rotations * k / steps))  # right-handed about the pole
        assert_allclose(way.frame[k], turn.apply(first), rtol=0, atol=1e-13)
        seen = way.frame[k] @ way.places.to_sun[k]
        lat, lon = np.arcsin(way.sin_latitude[k]), 2 * np.pi * way.turns[k]
        assert_allclose(seen, [np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], rtol=0, atol=1e-12)
    assert_allclose(way.sin_latitude, sun_on_body(way.places, obliquity, azimuth).sin_latitude, rtol=0, atol=4e-15)


def test_a_course_takes_equal_steps_of_time_through_its_orbits():
    way = course(A_M, 0.5, 0.3, 0.2, 3, 4, 60)
    assert_allclose(np.diff(way.places.mean_anomaly), 2 * np.pi * 3 / 60, rtol=0, atol=1e-14)
    assert (way.places.weight == 1 / 60).all()
    # Kepler's third law, three orbits
    assert_allclose(way.period_s, 3 * 2 * np.pi * np.sqrt(A_M**3 / GM_SUN), rtol=1e-14)
    assert_allclose(way.rate * way.period_s, 2 * np.pi * 4, rtol=1e-14)


def test_the_sun_stands_still_over_a_body_that_turns_once_in_a_circular_orbit():
    way = course(A_M, 0.0, 0.0, 0.0, 1, 1, 40)
    assert np.ptp(way.turns) < 1e-14
    assert_allclose(way.sin_latitude, 0, atol=1e-15)


def test_the_sun_moves_west_over_a_body_that_turns_fast_and_east_over_one_that_turns_backwards():
    fast = course(A_M, 0.0, 0.0, 0.0, 1, 5, 400)
    assert (np.diff(np.unwrap(2 * np.pi * fast.turns)) < 0).all()
    assert_allclose(np.diff(np.unwrap(2 * np.pi * fast.turns)).sum() * 400 / 399, -2 * np.pi * 4, rtol=1e-12)  # 5 - 1
    back = course(A_M, 0.0, np.pi, 0.0, 1, 5, 400)  # upside down; seen from its own pole the Sun goes round backwards
    assert_allclose(np.diff(np.unwrap(2 * np.pi * back.turns)).sum() * 400 / 399, -2 * np.pi * 6, rtol=1e-12)  # 5 + 1


@pytest.mark.parametrize("lit_samples", [1, 4])
def test_light_on_a_course_agrees_with_its_twin(lit_samples):
    shape = naive.jagged(80, rough=0.5, seed=2)
    table = horizons_of(shape, 16, lit_samples, cache=False)
    way = course(A_M, 0.3, 0.9, 0.4, 1, 2, 37)
    facets = np.array([5, 0, 79, 33, 41])
    found = lit_on_course(shape, table, way, facets)
    assert found.shape == (37, 5)
    shaded = 0
    for k in range(37):
        u = way.frame[k] @ way.places.to_sun[k]
        for l, f in enumerate(facets):
            mu = max(0.0, shape.normals[f] @ u)
            share = naive.share_that_sees(table, f, way.sin_latitude[k], way.turns[k])
            shaded += mu > 0 and share < 1
            assert abs(found[k, l] - mu * share) < 1e-14
    assert shaded > 3


def test_light_on_a_course_under_an_open_sky_is_the_cosine():
    shape = naive.jagged(80, seed=2)
    way = course(A_M, 0.3, 0.9, 0.4, 1, 2, 25)
    u = np.einsum("nkx,nx->nk", way.frame, way.places.to_sun)
    found = lit_on_course(shape, no_shadows(shape, 16), way, np.arange(80))
    assert_allclose(found, np.maximum(0, u @ shape.normals.T), rtol=0, atol=2e-15)
