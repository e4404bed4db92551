"""Force and torque of light and heat on a rotating body, at places round its orbit.

A facet's normal n and its lever r x n turn with the body. In the frame whose z is the spin pole and in which the Sun
has no y, a body vector v = (vx, vy, vz) stands at exp(-i lambda)(vx + i vy), lambda being the Sun's body longitude. So
the mean over a rotation of a flux q times v needs of q nothing but <q> and <q exp(i lambda)>.
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from smallbody.constants import C_M_S, SIGMA
from smallbody.heat import LANES, Ground, LagSolver, lag_period, march_period
from smallbody.light import (
    Course,
    Horizons,
    LightSums,
    Places,
    SunOnBody,
    lit_cosines,
    lit_latitudes,
    lit_on_course,
)
from smallbody.shape import Shape
from smallbody.workers import SILENT, Meter, share

LATITUDES = 81  # of the table that serves all facets under an open sky
WORTH_A_TABLE = 2 * LATITUDES  # with fewer facets under an open sky each is solved for itself


@dataclass(frozen=True)
class Push:
    """Force (p, 3) N and torque about the centre of mass (p, 3) N m at p places, in the orbit frame."""

    force: np.ndarray
    torque: np.ndarray


def lever_arms(shape: Shape) -> np.ndarray:
    """r x n of every facet, (f, 3) m."""
    return np.cross(shape.centroids_m, shape.normals)


def push_of_light(sums: LightSums, places: Places, sun: SunOnBody, bond_albedo: float) -> dict[str, Push]:
    """What light does at every place: "direct" as it arrives, "scattered" and "absorbed" by Lambert's law.

    "absorbed" is the push were all absorbed light given back as heat at once; the lag solver adds what the delay
    changes.
    source : direct -(S mu/c) u dA, Lambert -(2/3)(S mu/c) n dA (geometry)
    """
    press = places.flux_w_m2 / C_M_S
    lambert, lever = (-(2 / 3) * press[:, None] * x for x in (sums.lambert, sums.lever))
    u = np.stack([sun.cos_latitude, np.zeros_like(press), sun.sin_latitude], axis=1)
    direct = -(press * sums.across)[:, None] * u
    twist = -press[:, None] * np.cross(sums.lit_lever, u)

    def out(force: np.ndarray, torque: np.ndarray) -> Push:
        return Push(np.einsum("pk,pkx->px", force, sun.axes), np.einsum("pk,pkx->px", torque, sun.axes))

    a = bond_albedo
    return {
        "absorbed": out((1 - a) * lambert, (1 - a) * lever),
        "scattered": out(a * lambert, a * lever),
        "direct": out(direct, twist),
    }


@dataclass(frozen=True)
class HeatRun:
    """What the lag solver found: the push of the emission beyond the absorbed light, and temperatures to look at.

    excess_w : (p,) power emitted beyond the absorbed, over the whole surface
    temperature_k : (f, n) at the shown place, empty if none was asked for; mean_temperature_k : (f, p) likewise
    """

    push: Push
    excess_w: np.ndarray
    temperature_k: np.ndarray
    mean_temperature_k: np.ndarray


def push_of_heat(
    shape: Shape,
    horizons: Horizons,
    solver: LagSolver,
    sun: SunOnBody,
    bond_albedo: float,
    *,
    shown: int | None = None,
    meter: Meter = SILENT,
) -> HeatRun:
    """Solve the heat of all facets and sum what its delay does to force and torque.

    Facets under an open sky share one table over the latitude of their normals (longitude is a phase); overshadowed
    ones are solved each for itself.
    shown : place whose temperatures are kept
    """
    places = solver.places
    p, n, f = len(places), solver.nodes, len(shape.facets)
    shadowed = horizons.shadowed_facets
    free = np.flatnonzero(~horizons.overshadowed)
    if len(free) < WORTH_A_TABLE:
        shadowed, free = np.arange(f), free[:0]
    flux = places.flux_w_m2[:, None, None] * (1 - bond_albedo)
    lever = lever_arms(shape)
    area = shape.areas_m2
    temperature = np.empty((f, n) if shown is not None else (0, n), np.float32)
    means = np.empty((f, p) if shown is not None else (0, p), np.float32)
    parts: dict[int, tuple[np.ndarray, np.ndarray, np.ndarray]] = {}

    def solve(absorbed: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        t, mean = solver.solve(absorbed)
        return t, mean, solver.excess(t, absorbed)

    def work(start: int, end: int) -> None:
        facets = shadowed[start:end]
        absorbed = lit_cosines(shape, horizons, sun, facets) * flux
        t, mean, excess = solve(absorbed)
        if shown is not None:
            temperature[facets] = t[shown].T
            means[facets] = mean.T
        weigh = excess * area[facets]
        turned = weigh[1] - 1j * weigh[2]  # <x exp(-i lambda)>
        parts[start] = (
            _stack(turned, weigh[0], shape.normals[facets]),
            _stack(turned, weigh[0], lever[facets]),
            weigh[0].sum(axis=1),
        )

    share(work, len(shadowed), LANES, meter=meter, task="heat")
    lambert, arm, power = np.zeros((p, 3)), np.zeros((p, 3)), np.zeros(p)
    for start in sorted(parts):
        for total, part in zip((lambert, arm, power), parts[start]):
            total += part
    if len(free):
        table = _Table(solver, sun, flux, solve, meter)
        for total, part in zip((lambert, arm, power), table.sums(shape, lever, free)):
            total += part
        if shown is not None:
            temperature[free], means[free] = table.temperatures(shape, free, shown)
    scale = -2 / 3 / C_M_S
    push = Push(*(np.einsum("pk,pkx->px", scale * x, sun.axes) for x in (lambert, arm)))
    return HeatRun(push, power, temperature, means)


def push_of_course(
    shape: Shape,
    horizons: Horizons,
    way: Course,
    ground: Ground,
    bond_albedo: float,
    bins: np.ndarray,
    *,
    march: bool,
    shown: np.ndarray | None = None,
    meter: Meter = SILENT,
) -> HeatRun:
    """The same step by step through whole orbits, every facet for itself; Push and excess_w are of all n steps.

    march : by the depth-marching reference, else by the lag solver for long periods
    bins : (n,) int, which of the places 0 to max(bins) a step's temperature counts for in mean_temperature_k
    shown : steps whose temperatures are kept
    """
    n, f = len(way.turns), len(shape.facets)
    count = int(bins.max()) + 1
    flux = way.places.flux_w_m2[:, None] * (1 - bond_albedo)
    es = ground.emissivity * SIGMA
    vectors = np.concatenate([shape.normals, lever_arms(shape), np.ones((f, 1))], axis=1) * shape.areas_m2[:, None]
    by_bin = np.argsort(bins, kind="stable")
    first = np.searchsorted(bins[by_bin], np.arange(count))
    per_bin = np.bincount(bins, minlength=count)
    keep = shown is not None
    temperature = np.empty((f if keep else 0, len(shown) if shown is not None else 0), np.float32)
    means = np.empty((f if keep else 0, count), np.float32)
    lock = threading.Lock()
    waiting: dict[int, np.ndarray] = {}
    total = np.zeros((n, 7))
    done = [0]

    def work(start: int, end: int) -> None:
        facets = np.arange(start, end)
        light = lit_on_course(shape, horizons, way, facets) * flux
        if march:
            t = march_period(ground, way.period_s, light, fast_rate=way.rate, threads=1)
        else:
            t = lag_period(ground, way.period_s, light, threads=1)
        part = (es * t**4 - light) @ vectors[facets]
        with lock:
            waiting[start] = part
            while done[0] in waiting:  # in the order of the facets, so that sums are the same to the last bit
                np.add(total, waiting.pop(done[0]), out=total)
                done[0] += LANES
        if shown is not None:
            temperature[facets] = t[shown].T
            means[facets] = (np.add.reduceat(t[by_bin], first, axis=0) / per_bin[:, None]).T

    share(work, f, LANES, meter=meter, task="marching" if march else "heat of long periods")
    scale = -2 / 3 / C_M_S
    push = Push(*(np.einsum("nk,nkx->nx", scale * x, way.frame) for x in (total[:, :3], total[:, 3:6])))
    return HeatRun(push, total[:, 6], temperature, means)


def _stack(turned: np.ndarray, mean: np.ndarray, v: np.ndarray) -> np.ndarray:
    """Sum over facets of the mean of flux times body vector, (p, 3); turned, mean (p, L), v (L, 3)."""
    flat = turned @ (v[:, 0] + 1j * v[:, 1])
    return np.stack([flat.real, flat.imag, mean @ v[:, 2]], axis=1)


class _Table:
    """Temperatures under an open sky, on a grid of latitudes of the normal, for normals at longitude 0."""

    def __init__(
        self, solver: LagSolver, sun: SunOnBody, flux: np.ndarray, solve: Callable[..., tuple], meter: Meter
    ) -> None:
        self.latitude = np.linspace(-np.pi / 2, np.pi / 2, LATITUDES)
        p, n = len(solver.places), solver.nodes
        self.excess = np.empty((3, p, LATITUDES))
        self.t = np.empty((p, n, LATITUDES))
        self.mean = np.empty((p, LATITUDES))

        def work(start: int, end: int) -> None:
            absorbed = lit_latitudes(sun, self.latitude[start:end], n) * flux
            self.t[..., start:end], self.mean[..., start:end], self.excess[..., start:end] = solve(absorbed)

        share(work, LATITUDES, LANES, meter=meter, task="open sky")

    def _spread(self, latitude: np.ndarray) -> np.ndarray:
        """(L, LATITUDES) weights of cubic interpolation."""
        from scipy.interpolate import CubicSpline

        return np.asarray(CubicSpline(self.latitude, np.eye(LATITUDES))(latitude))

    def sums(self, shape: Shape, lever: np.ndarray, free: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """The three sums of `push_of_heat` over the free facets. All are linear in the table, so facets go first."""
        n, g, area = shape.normals[free], lever[free], shape.areas_m2[free]
        # a facet at longitude x sees the table's history later: <q exp(i lambda)> is the table's times exp(i x)
        phase = np.exp(-1j * np.arctan2(n[:, 1], n[:, 0]))
        columns = np.stack(
            [
                (n[:, 0] + 1j * n[:, 1]) * phase,
                n[:, 2] + 0j,
                (g[:, 0] + 1j * g[:, 1]) * phase,
                g[:, 2] + 0j,
                np.ones(len(free)) + 0j,
            ]
        )  # fmt: skip
        total = np.zeros((5, LATITUDES), complex)
        for start in range(0, len(free), 4096):
            part = slice(start, start + 4096)
            total += (columns[:, part] * area[part]) @ self._spread(np.arcsin(np.clip(n[part, 2], -1, 1)))
        turned = self.excess[1] - 1j * self.excess[2]
        flat, arm = turned @ total[0], turned @ total[2]
        up, arm_up, power = (self.excess[0] @ total[k].real for k in (1, 3, 4))
        return np.stack([flat.real, flat.imag, up], 1), np.stack([arm.real, arm.imag, arm_up], 1), power

    def temperatures(self, shape: Shape, free: np.ndarray, shown: int) -> tuple[np.ndarray, np.ndarray]:
        """Temperatures (L, n) at one place and daily means (L, p), interpolated linearly: pictures need no more."""
        n = shape.normals[free]
        nodes = self.t.shape[1]
        at = (np.arcsin(np.clip(n[:, 2], -1, 1)) / np.pi + 0.5) * (LATITUDES - 1)
        k = np.minimum(at.astype(int), LATITUDES - 2)
        q = (at - k)[:, None]
        node = np.arange(nodes) + (np.arctan2(n[:, 1], n[:, 0]) / (2 * np.pi) * nodes)[:, None]
        j = np.floor(node).astype(int)
        d = node - j
        t = self.t[shown]

        def along(row: np.ndarray) -> np.ndarray:
            return t[j % nodes, row[:, None]] * (1 - d) + t[(j + 1) % nodes, row[:, None]] * d

        return along(k) * (1 - q) + along(k + 1) * q, self.mean.T[k] * (1 - q) + self.mean.T[k + 1] * q
