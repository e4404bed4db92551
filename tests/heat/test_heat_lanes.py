"""Lanes: what a kernel does with a row of facets as one value is what NumPy does with the row."""

import numpy as np
import pytest
from numba import njit

from smallbody.heat._lanes import LANES, any_above, larger, largest, load, root, size, smaller, spread, store


@njit
def every_operation(a, b, x, out):
    u, v = load(a, 1), load(b, 0)
    store(out, 0, u + v)
    store(out, 1, u - v)
    store(out, 2, u * v)
    store(out, 3, u / v)
    store(out, 4, u + x)
    store(out, 5, x - u)
    store(out, 6, x * u)
    store(out, 7, x / u)
    store(out, 8, larger(u, v))
    store(out, 9, smaller(u, v))
    store(out, 10, size(u))
    store(out, 11, root(size(v)))
    store(out, 12, spread(x))


@njit
def questions(a, limit):
    u = load(a, 0)
    return any_above(u, limit), largest(u)


def test_every_operation_is_what_numpy_does():
    rng = np.random.default_rng(5)
    a, b, x = rng.normal(size=(2, LANES)), rng.normal(size=(1, LANES)), 1.7
    out = np.full((13, LANES), np.nan)
    a.flags.writeable = b.flags.writeable = False
    every_operation(a, b, x, out)
    u, v = a[1], b[0]
    plain = [u + v, u - v, u * v, u / v, u + x, x - u, x * u, x / u, np.maximum(u, v), np.minimum(u, v), abs(u)]
    np.testing.assert_allclose(out, [*plain, np.sqrt(abs(v)), np.full(LANES, x)], rtol=1e-15)


@pytest.mark.parametrize("lane", [0, 7, LANES - 1])
def test_one_lane_above_the_limit_is_noticed(lane):
    row = np.zeros((1, LANES))
    row[0, lane] = 2.0
    assert questions(row, 1.0) == (True, 2.0)
    assert questions(row, 2.0) == (False, 2.0)


@pytest.mark.parametrize("lane", [0, 7, LANES - 1])
def test_a_lane_that_is_not_a_number_never_counts_as_settled(lane):
    row = np.zeros((1, LANES))
    row[0, lane] = np.nan
    above, most = questions(row, 1.0)
    assert above
    assert np.isnan(most)


def test_larger_keeps_what_is_not_a_number():
    a, b, out = np.zeros((2, LANES)), np.zeros((1, LANES)), np.zeros((13, LANES))
    a[1, 3] = np.nan
    b[0, :] = 1.0
    every_operation(a, b, 1.0, out)
    assert np.isnan(out[8, 3])
    assert np.isnan(out[9, 3])
