"""The marching twin of the lag solver: surface temperatures by stepping heat conduction through depth and time.

Slow and plain where the lag solver is quick: cells in depth, second-order steps through a whole period, again and again
until two periods agree. It shares nothing with the lag solver but the physics, one-dimensional conduction in a
half-space whose properties do not change with temperature or depth.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from smallbody.constants import SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.heat.lag import Ground
from smallbody.workers import SILENT, Meter, share

DEPTH_SKINS = 7.0
GROWTH = 1.25
FIRST_CELL = 0.02
TOL_K = 5e-3
WARM_STEPS = (8, 24)  # steps in a turn of the fastest clock on the coarse periods that come first
WARM_TOL_K = (0.3, 0.03)  # how well two coarse periods must agree
MOST_WARM = 40  # coarse periods, at most, of each kind
MOST_PERIODS = 60


@dataclass(frozen=True)
class DepthGrid:
    """Cells below the surface. Depths times sqrt(density * heat capacity / conductivity), in square roots of a second.

    node : (m,) depths of the nodes, the first at the surface
    width : (m,) of the cell around each node
    """

    node: np.ndarray
    width: np.ndarray

    @property
    def gaps(self) -> np.ndarray:
        """Distances between neighbouring nodes, (m - 1,)."""
        return np.diff(self.node)

    def admittance(self, rate: np.ndarray | float) -> np.ndarray:
        """Flux into the surface for unit inertia and unit temperature exp(i rate t); a half-space has sqrt(i rate)."""
        s = 1j * np.asarray(rate, float)
        y = s * self.width[-1]
        for width, gap in zip(self.width[-2::-1], self.gaps[::-1]):
            y = s * width + 1.0 / (gap + 1.0 / y)
        return np.asarray(y)


def depth_grid(first: float, growth: float, depth: float) -> DepthGrid:
    """Nodes at geometrically growing distances, and cell faces placed so that the surface answers like a half-space.

    first : distance of the second node from the surface
    growth : ratio of successive distances, above 1
    depth : the last node is at least so deep

    Nodes stand at A (r^i - 1), faces at A (r^(i + 1/2) - 1), A = first / (r - 1). Measured from A above the surface
    each face is at the geometric mean of two nodes; gaps and widths follow one law, half a step apart: resistance and
    capacity of the ground are cut up alike, and what one gets wrong the other makes good. The admittance is then that
    of a half-space but for the second-order error of the first cell; the growth itself costs 1e-6 at r = 1.25, 1e-5 at
    1.5. With faces half-way in depth it is too large by (ln r)^2/16, 0.3 % at r = 1.25.
    source : duality of primary and dual steps, Ingerman, Druskin & Knizhnerman 2000, Comm. Pure Appl. Math. 53, 1039
        (from memory); the faces, and what they are worth, are our own measurement
    """
    unit = first / (growth - 1.0)
    step = np.log(growth)
    count = int(np.ceil(np.log1p(depth / unit) / step)) + 1
    i = np.arange(count)
    node = unit * np.expm1(step * i)
    faces = np.concatenate([[0.0], unit * np.expm1(step * (i[:-1] + 0.5)), node[-1:]])
    return DepthGrid(node, np.diff(faces))


def march_period(
    ground: Ground,
    period_s: float,
    absorbed_w_m2: np.ndarray,
    *,
    fast_rate: float | None = None,
    depth_skins: float = DEPTH_SKINS,
    growth: float = GROWTH,
    first_cell: float = FIRST_CELL,
    tol_k: float = TOL_K,
    meter: Meter = SILENT,
    threads: int = 0,
) -> np.ndarray:
    """Surface temperatures of ground under light that repeats itself: (n, L), kelvin.

    ground : Ground
    period_s : after which the light repeats itself: a rotation, or a whole orbit of many
    absorbed_w_m2 : (n, L) absorbed light at n equal steps of the period, for L facets; the temperatures are of the same
        instants
    fast_rate : rad/s of the fastest clock in the light, the rotation; sets the finest cell (default: the period's own)
    depth_skins : depth of the grid in skin depths of the period, sqrt(2 k/(density * heat capacity * rate))
    growth : ratio of successive cells, above 1 and at most 2
    first_cell : distance of the second node from the surface in skin depths of the fastest clock
    tol_k : two successive periods agree when no temperature differs by more
    raises : SizeMismatch, if there are too few steps in a turn of the fastest clock or the light is no table;
        ValueError, for light that is negative or not finite, or numbers out of their range;
        NotSettled, if periods do not come to agree (temperatures so far are in the details)
    source : BDF2 in time, cells in depth (`depth_grid`), Newton's method at the surface

    Before whole periods come coarse ones, with few steps in a turn. After each period the temperatures at depth are
    moved to where its energy balance, and the absence of a mean flux at any depth, put them. The last of the whole
    periods is returned. Ground without thermal inertia is in equilibrium with the light.

    >>> noon = march_period(Ground(1.0, 0.0), 3600.0, np.full((96, 1), 1361.0))[0, 0]
    >>> round(float(noon))
    394
    """
    light = np.asarray(absorbed_w_m2, float)
    rate = 2 * np.pi / period_s
    fast = rate if fast_rate is None else abs(fast_rate)
    _check(light, period_s, fast, rate, depth_skins, growth, first_cell, tol_k)
    es = ground.emissivity * SIGMA
    if ground.thermal_inertia == 0:
        return np.asarray((light / es) ** 0.25)
    from smallbody.heat._lanes import LANES

    grid = depth_grid(first_cell * np.sqrt(2 / fast), growth, depth_skins * np.sqrt(2 / rate))
    out = np.empty_like(light)

    def work(start: int, end: int) -> None:
        block = np.empty((len(light), LANES))
        block[:, : end - start] = light[:, start:end]
        block[:, end - start :] = block[:, end - start - 1 : end - start]  # idle lanes repeat the last facet
        out[:, start:end] = _settle(block, es, ground.thermal_inertia, period_s, fast / rate, grid, tol_k)[
            :, : end - start
        ]

    share(work, light.shape[1], LANES, meter=meter, task="marching", threads=threads)
    return out


def _check(
    light: np.ndarray, period: float, fast: float, rate: float, depth: float, growth: float, first: float, tol: float
) -> None:
    if light.ndim != 2 or light.shape[1] == 0:
        raise SizeMismatch(f"absorbed light has shape {light.shape}, not steps by facets")
    for name, value, low, high in (
        ("period_s", period, 0.0, np.inf), ("depth_skins", depth, 0.0, np.inf), ("growth", growth, 1.0, 2.0),
        ("first_cell", first, 0.0, 1.0), ("tol_k", tol, 0.0, np.inf),
    ):  # fmt: skip
        if not (low < value <= high and np.isfinite(value)):
            raise ValueError(f"{name} is {value:g}, not above {low:g} and at most {high:g}")
    if not (np.isfinite(fast) and fast > (1 - 1e-9) * rate):
        raise ValueError(f"fast_rate is {fast:g} rad/s, slower than the period's own {rate:g} rad/s")
    if len(light) < 16 or len(light) * rate < 8 * fast:
        raise SizeMismatch(
            f"{len(light)} steps in a period of {fast / rate:.4g} turns; at least 16, and 8 in a turn, are needed"
        )
    if not (light.min() >= 0 and light.max() < np.inf):
        step, facet = np.argwhere(~((light >= 0) & (light < np.inf)))[0]
        raise ValueError(f"absorbed light is {light[step, facet]:g} at step {step} of facet {facet}; it is 0 or more")


def _settle(
    light: np.ndarray, es: float, gamma: float, period: float, turns: float, grid: DepthGrid, tol: float
) -> np.ndarray:
    """Periods of a block, coarse ones first, until two agree; (n, L)."""
    from smallbody.heat._march import _average

    n, lanes = light.shape
    mean = light.mean(axis=0)
    state = np.empty((2, len(grid.node), lanes))
    state[:] = (mean / es) ** 0.25
    warm = [(round(s * turns), w) for s, w in zip(WARM_STEPS, WARM_TOL_K) if 16 <= s * turns < 0.6 * n]
    dt = period / n
    for steps, enough in warm:
        _continue_with_step(state, dt, period / steps)
        dt = period / steps
        coarse = np.empty((steps, lanes))
        _average(light, coarse)
        _periods(coarse, mean, es, gamma, dt, grid, state, enough, MOST_WARM)
    _continue_with_step(state, dt, period / n)
    out, moved = _periods(light, mean, es, gamma, period / n, grid, state, tol, MOST_PERIODS)
    if not moved <= tol:
        raise NotSettled(
            f"temperatures of successive periods still differ by {moved:.2g} K after {MOST_PERIODS} of them; "
            f"try tol_k above {tol:g}",
            temperature_k=out, worst_k=moved,
        )  # fmt: skip
    return out


def _periods(
    light: np.ndarray, mean: np.ndarray, es: float, gamma: float, dt: float, grid: DepthGrid, state: np.ndarray,
    tol: float, most: int,
) -> tuple[np.ndarray, float]:  # fmt: skip
    """March through periods until two agree: surface temperatures of the last, and by how much they differ, K."""
    from smallbody.heat._march import MOVED, _eliminate, _march

    rows, sums = np.empty((4, len(grid.node))), np.empty((4, light.shape[1]))
    _eliminate(grid.gaps, grid.width, gamma, dt, rows)
    out = np.empty(light.shape)
    moved = np.inf
    for count in range(most):
        start = state.copy()
        _march(light, es, rows, state, sums, out)
        if count > 0:
            moved = float(sums[MOVED].max())
        if moved <= tol:
            break
        _correct(start, state, sums, mean, es, dt * len(light), grid)
    return out, moved


def _correct(
    start: np.ndarray,
    state: np.ndarray,
    sums: np.ndarray,
    mean: np.ndarray,
    es: float,
    period: float,
    grid: DepthGrid,
) -> None:
    """Move the temperatures at depth towards those of the periodic state.

    There, no heat flows at any depth in the mean, so that the mean temperature is the same all the way down; at the
    surface it is such that what is emitted balances what is absorbed. The means of the period just marched follow from
    what the cells gained in it, without adding up every cell at every step: summed over a period, the two-step formula
    leaves only its ends.
    """
    from smallbody.heat._march import CUBE, FOURTH

    gain = grid.width[:, None] * (1.5 * (state[1] - start[1]) - 0.5 * (state[0] - start[0])) / period
    flux = np.cumsum(gain[::-1], axis=0)[::-1]  # down through the face above each node, per unit inertia
    below_surface = np.concatenate([[np.zeros(len(mean))], -np.cumsum(flux[1:] * grid.gaps[:, None], axis=0)])
    slope = 4 * es * sums[CUBE]
    rise = (mean - es * sums[FOURTH]) / np.where(slope > 0, slope, 1.0)
    step = rise - below_surface
    low = np.minimum(state[0], state[1])
    state += np.maximum(step, -0.5 * low)


def _continue_with_step(state: np.ndarray, dt: float, new: float) -> None:
    """Put the older of the two temperatures where a step of another length wants it."""
    state[0] = np.maximum(state[1] + (state[0] - state[1]) * (new / dt), 0.0)
