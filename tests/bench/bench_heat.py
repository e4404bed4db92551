"""Core time and error of the lag solver and of its marching twin, side by side: python tests/bench/bench_heat.py

Sixteen facets, one at each Gauss latitude of a sphere, go round an orbit. What is compared is what the delay of their
heat does to the semimajor axis of the sphere: the mean of (emitted - absorbed) times the normal's part along
e sin f radial + (1 + e cos f) transverse (Gauss's equations), against a march of four times the steps on finer cells.
Times are the least of several, of the solvers alone: light is worked out before the clock starts. It would cost the
march more, since it wants it at every step of every rotation.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable
from functools import partial

import numpy as np

from smallbody.constants import AU_M, HOUR_S, SIGMA
from smallbody.heat import Ground, LagSolver, march_period
from smallbody.light import Places, places_at, places_between, sun_on_body

EMISSIVITY, ALBEDO, A_AU, AZIMUTH = 0.9, 0.05, 1.1, 0.3
FACETS = 16
Z, SHARE = np.polynomial.legendre.leggauss(FACETS)  # of the normals' latitudes, and of the sphere each stands for
LONGITUDE = 2.4 * np.arange(FACETS)


def gauss_part(places: Places, axes: np.ndarray, sun_longitude: np.ndarray) -> np.ndarray:
    """Part of the normals along the direction that moves the semimajor axis; (..., L) as sun_longitude (...)."""
    f, e = places.true_anomaly, places.e
    radial = -places.to_sun
    transverse = np.cross([0.0, 0.0, 1.0], radial)
    along = (e * np.sin(f))[:, None] * radial + (1 + e * np.cos(f))[:, None] * transverse
    x, y, z = np.einsum("pij,pj->ip", axes, along)
    flat = np.sqrt(1 - Z**2)
    angle = LONGITUDE - sun_longitude[..., None]
    shape = (-1,) + (1,) * (angle.ndim - 1)
    return flat * (np.cos(angle) * x.reshape(shape) + np.sin(angle) * y.reshape(shape)) + Z * z.reshape(shape)


def absorbed_light(places: Places, sin_lat: np.ndarray, cos_lat: np.ndarray, sun_longitude: np.ndarray) -> np.ndarray:
    """Absorbed light, W/m2; (..., L) as sun_longitude (...)."""
    shape = (-1,) + (1,) * sun_longitude.ndim
    angle = LONGITUDE - sun_longitude[..., None]
    cosine = sin_lat.reshape(shape) * Z + cos_lat.reshape(shape) * np.sqrt(1 - Z**2) * np.cos(angle)
    return np.asarray((1 - ALBEDO) * places.flux_w_m2.reshape(shape) * np.maximum(cosine, 0.0))


def least(work: Callable[[], np.ndarray], repeats: int) -> tuple[np.ndarray, float]:
    """What work returns, and the least core time it takes, in microseconds a facet."""
    best = np.inf
    for _ in range(repeats):
        start = time.process_time()
        result = work()
        best = min(best, time.process_time() - start)
    return result, best / FACETS * 1e6


class March:
    """The marching twin through a whole orbit."""

    def __init__(self, e: float, obliquity: float, rotations: int, steps: int) -> None:
        n = rotations * steps
        places = places_at(A_AU * AU_M, e, 2 * np.pi * np.arange(n) / n, np.full(n, 1 / n))
        sun = sun_on_body(places, obliquity, AZIMUTH)
        reference = sun_on_body(places_at(A_AU * AU_M, e, np.zeros(1), np.ones(1)), obliquity, AZIMUTH).axes[0]
        x, y = reference[0], reference[1]  # do not spin
        ascension = np.arctan2(sun.axes[:, 0] @ y, sun.axes[:, 0] @ x)
        longitude = ascension - 2 * np.pi * rotations * np.arange(n) / n
        self.light = absorbed_light(places, sun.sin_latitude, sun.cos_latitude, longitude)
        self.part = gauss_part(places, sun.axes, longitude)
        self.period = 2 * np.pi / places.mean_motion
        self.spin = rotations * places.mean_motion

    def temperatures(self, gamma: float, **choices: float) -> np.ndarray:
        ground = Ground(EMISSIVITY, gamma)
        return march_period(ground, self.period, self.light, fast_rate=self.spin, threads=1, **choices)  # type: ignore[arg-type]

    def drift(self, t: np.ndarray) -> float:
        return float(((EMISSIVITY * SIGMA * t**4 - self.light) * self.part).mean(axis=0) @ SHARE)


class Lag:
    """The lag solver at places round the orbit."""

    def __init__(self, e: float, obliquity: float, rotations: int, count: int, nodes: int) -> None:
        self.places = places_between(A_AU * AU_M, e, count)
        sun = sun_on_body(self.places, obliquity, AZIMUTH)
        longitude = np.tile(-2 * np.pi * np.arange(nodes) / nodes, (count, 1))
        self.light = absorbed_light(self.places, sun.sin_latitude, sun.cos_latitude, longitude)
        self.light = np.ascontiguousarray(self.light.reshape(count, nodes, FACETS))
        self.part = gauss_part(self.places, sun.axes, longitude)
        self.rates = rotations * self.places.mean_motion - sun.ascension_rate
        self.nodes = nodes

    def temperatures(self, gamma: float) -> Callable[[], np.ndarray]:
        solver = LagSolver(Ground(EMISSIVITY, gamma), self.places, self.nodes, self.rates)
        return lambda: solver.solve(self.light)[0]

    def drift(self, t: np.ndarray) -> float:
        excess = EMISSIVITY * SIGMA * t**4 - self.light
        return float(self.places.weight @ (excess * self.part).mean(axis=1) @ SHARE)


FEW = {"growth": 1.4, "first_cell": 0.04, "tol_k": 5.0}  # as few cells and periods as an error of some 1e-3 allows
MARCHES: tuple[tuple[int, dict[str, float], str], ...] = (  # steps in a rotation, choices, in words
    (96, {}, "as it comes"),
    (96, {"growth": 1.08}, "cells growing by 8 %"),
    (96, FEW, "few cells, two periods"),
    (64, FEW, "few cells, two periods"),
    (48, FEW, "few cells, two periods"),
)
GOOD = 1e-3  # what counts as equal accuracy
LAGS = ((24, 64), (24, 96), (32, 64), (48, 96))


def compare(gamma: float, e: float, obliquity: float, rotations: int, repeats: int) -> None:
    period_h = 2 * np.pi / places_at(A_AU * AU_M, e, np.zeros(1), np.ones(1)).mean_motion / rotations / HOUR_S
    print(
        f"\ninertia {gamma:g}, e {e:g}, obliquity {np.degrees(obliquity):g} deg, {rotations} rotations of "
        f"{period_h:.2f} h in an orbit"
    )
    fine = March(e, obliquity, rotations, 384)
    true = fine.drift(fine.temperatures(gamma, growth=1.2, first_cell=0.02, tol_k=1e-3))
    del fine
    lags = []
    for count, nodes in LAGS:
        lag = Lag(e, obliquity, rotations, count, nodes)
        work = lag.temperatures(gamma)
        work()
        t, us = least(work, 5 * repeats)
        lags.append((us, abs(lag.drift(t) / true - 1)))
        print(f"  lag    {count:3} places x {nodes:3} nodes {'':24}{us:10.1f} us/facet   error {lags[-1][1]:8.1e}")
    us_lag, error_lag = lags[0]
    fits: list[tuple[float, str]] = []
    for steps, choices, words in MARCHES:
        march = March(e, obliquity, rotations, steps)
        t, us = least(partial(march.temperatures, gamma, **choices), repeats)
        error = abs(march.drift(t) / true - 1)
        print(
            f"  march {rotations:5} x {steps:3} steps, {words:24}{us:10.1f} us/facet   error {error:8.1e}   "
            f"{us / us_lag:6.0f} times the {LAGS[0][0]} x {LAGS[0][1]} lag"
        )
        if error <= max(error_lag, GOOD):
            fits.append((us, f"{steps} steps, {words}"))
    if fits:
        us, words = min(fits)
        print(
            f"  least march as good as that lag, or good to {GOOD:.1%}: {us / us_lag:.0f} times its core time ({words})"
        )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--rotations", type=int, default=2400)
    parser.add_argument("--repeats", type=int, default=3)
    asked = parser.parse_args()
    print(f"core time of {FACETS} facets on one thread; error of what delayed heat does to the semimajor axis")
    for gamma, e, obliquity in ((200.0, 0.2, 60.0), (50.0, 0.0, 0.0), (500.0, 0.4, 178.0), (1500.0, 0.0, 90.0)):
        compare(gamma, e, np.radians(obliquity), asked.rotations, asked.repeats)


if __name__ == "__main__":
    main()
