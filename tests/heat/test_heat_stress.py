"""The lag solver settles whatever it is asked: random orbits, grounds and days, poles, dark stretches."""

import numpy as np
import pytest

from smallbody.constants import AU_M, SIGMA
from smallbody.heat import LANES, Ground, LagSolver
from smallbody.light import places_between, sun_on_body
from smallbody.push.solve import default_places


def random_case(rng):
    e, tilt, turn = rng.uniform(0, 0.95), rng.uniform(0, np.pi), rng.uniform(0, 2 * np.pi)
    a, gamma, hours = 10 ** rng.uniform(-0.3, 1.6), 10 ** rng.uniform(-2, 4), 10 ** rng.uniform(-1.5, 2)
    nodes = int(rng.choice([16, 32, 64]))
    places = places_between(a * AU_M, e, default_places(e))
    sun = sun_on_body(places, tilt, turn)
    omega = 2 * np.pi / hours / 3600
    up = rng.uniform(-1, 1, LANES)
    up[:2] = 1, -1
    hour = -2 * np.pi * np.arange(nodes)[None, :, None] / nodes - rng.uniform(0, 2 * np.pi, LANES)
    mu = sun.sin_latitude[:, None, None] * up
    mu = mu + sun.cos_latitude[:, None, None] * np.sqrt(1 - up**2) * np.cos(hour)
    light = 0.95 * places.flux_w_m2[:, None, None] * np.maximum(mu, 0) * (rng.uniform(size=(1, nodes, LANES)) < 0.9)
    rates = omega - np.clip(sun.ascension_rate, -0.25 * omega, 0.25 * omega)
    return LagSolver(Ground(0.9, gamma), places, nodes, rates), light


@pytest.mark.parametrize("count", [8, pytest.param(200, marks=pytest.mark.slow)])
def test_random_bodies_settle_and_emit_what_they_absorb(count):
    rng = np.random.default_rng(20261201)
    for _ in range(count):
        solver, light = random_case(rng)
        t, _ = solver.solve(light)
        assert t.min() >= 0
        weight = solver.places.weight
        gone = np.einsum("p,pnl->l", weight, 0.9 * SIGMA * t**4 - light)
        assert np.abs(gone).max() < 1e-3 * np.einsum("p,pnl->l", weight, light).max()  # of the brightest facet
