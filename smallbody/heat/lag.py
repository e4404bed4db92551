"""The periodic lag solver: surface temperatures without a depth grid, rotation and orbit together.

Below a facet the ground is a half-space, so the flux conducted into it is the thermal inertia times the half-derivative
in time of the surface temperature. Over a rotation that operator is a circulant by convolution quadrature (Lubich 1988,
Numerische Mathematik 52, 129) with the second-order backward-difference symbol; its weights form an M-matrix, so
temperatures stay positive whatever the inertia. Over the orbit it acts on the daily means.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from smallbody.constants import SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.light import Places

LANES = 16  # facets solved in lockstep, as in _lanes
TOL = 1e-4  # rounds end when none moved a node by a larger share of the hottest day's mean; about a ninth of it is left
ENOUGH = 1e-2  # the share that may be left where a night is asked for more heat than it has: `roughest` tells
MOST_ROUNDS = 60


def rotation_weights(nodes: int, thermal_inertia: float, rate: float) -> np.ndarray:
    """Weights w of the conducted flux at node j, sum_k w[k] T[j-k], over one rotation; (n,) W m-2 K-1.

    nodes : time steps in a rotation
    thermal_inertia : J m-2 K-1 s-1/2
    rate : of the rotation, rad/s
    source : Lubich 1988, symbol d(z) = 3/2 - 2 z + z^2/2
    """
    z = np.exp(-2j * np.pi * np.arange(nodes) / nodes)
    symbol = 1.5 - 2 * z + 0.5 * z * z
    symbol[0] = 0.0
    dt = 2 * np.pi / (nodes * rate)
    return np.asarray(thermal_inertia * np.fft.ifft(np.sqrt(symbol / dt)).real)


def orbit_operator(places: Places) -> np.ndarray:
    """Matrix b of the conducted flux at place p, sum_q b[p, q] T[q], for unit thermal inertia; (p, p).

    The daily mean is taken as the periodic cubic spline through the places, in the running number of the place (smooth
    in it even where places stand far apart in time), and its half-derivative in time is taken exactly, by Fourier
    series on a fine grid of equal times. Places equally spaced in time need no special case.
    """
    count = len(places)
    if count < 3:
        return np.zeros((count, count))
    half = _half_derivatives(places.mean_anomaly.tobytes()) * np.sqrt(places.mean_motion)
    out = half - np.diag(half.sum(axis=1))  # a constant conducts nothing
    return out - places.weight @ out  # and over a whole orbit nothing is conducted in the mean


SUPPORT = 24  # places to either side over which the spline of one place has died away, to 1e-13 of itself


@lru_cache(maxsize=16)
def _half_derivatives(mean_anomaly: bytes) -> np.ndarray:
    """Half-derivative at place p of the spline that is 1 at place q and 0 at the others, for unit mean motion."""
    from scipy.fft import irfft, rfft
    from scipy.interpolate import CubicSpline

    m = np.frombuffer(mean_anomaly)
    count = len(m)
    gap = np.diff(np.append(m, m[0] + 2 * np.pi)).min()
    fine = 1 << int(np.clip(np.ceil(np.log2(16 * 2 * np.pi / gap)), 10, 18))
    times = 2 * np.pi * np.arange(fine) / fine
    s = _running_number(m, times)
    unit = np.sqrt(1j * np.arange(fine // 2 + 1))
    card = np.zeros(count + 1)
    card[[0, count]] = 1.0
    spline = CubicSpline(np.arange(count + 1), card, bc_type="periodic")
    # cubic interpolation of the result at the places
    near = m / (2 * np.pi) * fine
    first = np.floor(near).astype(int) - 1
    d = near - first
    points = (first[:, None] + np.arange(4)) % fine
    weights = np.stack(
        [
            -(d - 1) * (d - 2) * (d - 3) / 6,
            d * (d - 2) * (d - 3) / 2,
            -d * (d - 1) * (d - 3) / 2,
            d * (d - 1) * (d - 2) / 6,
        ],
        axis=1,
    )
    out = np.empty((count, count))
    for q in range(count):
        away = np.mod(s - q + count / 2, count) - count / 2
        bump = np.zeros(fine)
        close = np.abs(away) < SUPPORT
        bump[close] = spline(np.mod(away[close], count))
        out[:, q] = (irfft(unit * rfft(bump), fine)[points] * weights).sum(axis=1)
    return out


def _running_number(mean_anomaly: np.ndarray, times: np.ndarray) -> np.ndarray:
    """Running number of the place at given mean anomalies in [0, 2 pi): smooth, equal to q at place q, periodic."""
    from scipy.interpolate import CubicSpline

    count = len(mean_anomaly)
    q = np.arange(count + 1)
    sway = np.append(mean_anomaly, mean_anomaly[0] + 2 * np.pi) - 2 * np.pi * q / count
    dense = np.linspace(0.0, count, 256 * count + 1)
    m = 2 * np.pi * dense / count + CubicSpline(q, sway, bc_type="periodic")(dense)
    times = mean_anomaly[0] + np.mod(times - mean_anomaly[0], 2 * np.pi)
    return np.asarray(CubicSpline(m, dense)(times))


def rate_of_change(places: Places) -> np.ndarray:
    """Matrix of the time derivative at the places of the periodic cubic spline through them, (p, p), 1/s."""
    from scipy.interpolate import CubicSpline

    count = len(places)
    q = np.arange(count + 1)
    cards = np.eye(count)[:, np.mod(q, count)].T
    slope = CubicSpline(q, cards, bc_type="periodic")(q[:-1], 1)
    sway = np.append(places.mean_anomaly, places.mean_anomaly[0] + 2 * np.pi) - 2 * np.pi * q / count
    pace = 2 * np.pi / count + CubicSpline(q, sway, bc_type="periodic")(q[:-1], 1)
    return np.asarray(slope * places.mean_motion / pace[:, None])


def steady_orbit_operator(places: Places) -> np.ndarray:
    """The same matrix with the daily mean taken as straight lines in time between the places: less exact, but an
    M-matrix, so that temperatures stay positive whatever the light.

    source : the L1 formula (Oldham & Spanier 1974, The Fractional Calculus, sec. 8.2, from memory) with the memory of
        all earlier orbits summed as a Hurwitz zeta function
    """
    count = len(places)
    if count < 3:
        return np.zeros((count, count))
    period = 2 * np.pi / places.mean_motion
    x = places.mean_anomaly / (2 * np.pi)
    gap = np.diff(np.append(x, x[0] + 1))
    # sum over orbits of (age + m)^(-1/2), integrated over age: twice the Hurwitz zeta function of order -1/2
    age_start = np.mod(x[:, None] - x[None, :], 1.0)  # of the line that begins at place q, seen from place p
    age_start[np.diag_indices(count)] = 1.0
    age_end = age_start - gap
    memory = 2 * (_zeta_half(age_start) - _zeta_half(np.maximum(age_end, 0.0))) / np.sqrt(np.pi * period)
    weight = memory / gap  # of the step from place q to q + 1
    return np.roll(weight, 1, axis=1) - weight


def _zeta_half(a: np.ndarray) -> np.ndarray:
    """Hurwitz zeta function of order -1/2 at a in [0, 1], by Euler-Maclaurin summation (NIST DLMF 25.11.5, 25.2.9)."""
    terms = 12
    k = np.arange(terms)
    z = a + terms
    head = np.sqrt(a[..., None] + k).sum(axis=-1)
    return np.asarray(head - z**1.5 / 1.5 + z**0.5 / 2 - z**-0.5 / 24 + z**-2.5 / 1920)


@dataclass(frozen=True)
class Ground:
    """What the surface is made of: emissivity, and thermal inertia in J m-2 K-1 s-1/2."""

    emissivity: float
    thermal_inertia: float


class LagSolver:
    """Temperatures of facets that all rotate and orbit together.

    ground : Ground
    places : Places round the orbit
    nodes : time steps in a rotation
    rates : (p,) rad/s, of the ground under a direction in the sky that turns but slowly
    ahead : (p,) rad, by how much the Sun stands east of that direction. Given, the days' change from place to place is
        followed too, to first order in the orbit's rate over the rotation's; None leaves it out
    """

    def __init__(
        self, ground: Ground, places: Places, nodes: int, rates: np.ndarray, ahead: np.ndarray | None = None
    ) -> None:
        if len(rates) != len(places) or (ahead is not None and len(ahead) != len(places)):
            raise SizeMismatch(f"{len(rates)} rates for {len(places)} places")
        self._change: tuple[np.ndarray, np.ndarray, np.ndarray] | None = None
        if ahead is not None and ground.thermal_inertia > 0 and len(places) >= 3:
            # conduction's symbol is sqrt(i k rate + d/dt), nearly sqrt(i k rate) + (d/dt) / (2 sqrt(i k rate))
            k = np.arange(nodes // 2 + 1)
            answer = np.zeros((len(places), len(k)), complex)
            answer[:, 1:] = 0.5 * ground.thermal_inertia / np.sqrt(1j * k[1:] * np.asarray(rates)[:, None])
            if nodes % 2 == 0:
                answer[:, -1] = 0.0  # the fastest harmonic has no phase
            turn = np.exp(-1j * k * np.asarray(ahead)[:, None])
            self._change = answer * turn.conj(), rate_of_change(places), turn
        self.ground, self.places, self.nodes = ground, places, nodes
        self.roughest = 0.0  # largest share that any facet so far still moved by in the end
        w = np.array([rotation_weights(nodes, ground.thermal_inertia, r) for r in rates])
        self.weights = np.ascontiguousarray(np.concatenate([w[:, ::-1], w[:, ::-1]], axis=1))
        self.season = orbit_operator(places) if ground.thermal_inertia > 0 else np.zeros((len(places),) * 2)

    def solve(self, absorbed_w_m2: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Surface temperatures (p, n, L) and their daily means (p, L), K, for absorbed sunlight (p, n, L) in W/m2.

        raises : SizeMismatch; NotSettled, if the iteration does not end (temperatures so far are in the details)
        """
        p, n, facets = absorbed_w_m2.shape
        if (p, n) != (len(self.places), self.nodes):
            raise SizeMismatch(
                f"absorbed light is {p} places by {n} nodes, the solver {len(self.places)} by {self.nodes}"
            )
        if facets > LANES:
            raise SizeMismatch(f"absorbed light of {facets} facets; a block has at most {LANES}")
        light = full_block(absorbed_w_m2)
        t, means = self._settle(light)
        if self._change is not None:
            after, rate, before = self._change
            days = np.fft.rfft(t, axis=1) * before[:, :, None]
            days = np.einsum("pq,qkl->pkl", rate, days) * after[:, :, None]
            t, means = self._settle(light - np.fft.irfft(days, n, axis=1))
        return t[:, :, :facets], means[:, :facets]

    def _settle(self, light: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Temperatures and daily means of a full block."""
        p, n, _ = light.shape
        t, moments, rounds, worst = self._run(light, self.season)
        if not worst <= TOL:
            # near darkness a spline through the daily means may ask for temperatures below zero where light comes and
            # goes fast; straight lines between the places never do, and such facets emit too little to need better
            lost = np.flatnonzero(~(moments[:, 4].max(axis=0) <= TOL * moments[:, 0].max(axis=0)))
            others, more, rounds, worst = self._run(full_block(light[:, :, lost]), self.steady_season)
            t[:, :, lost], moments[:, :, lost] = others[:, :, : len(lost)], more[:, :, : len(lost)]
        if not worst <= ENOUGH:
            raise NotSettled(
                f"temperatures still move by a share of {worst:.2g} after {rounds} rounds; try other numbers of "
                f"rotation nodes (now {n}) or orbit places (now {p})",
                temperature_k=t, rounds=rounds, worst=worst,
            )  # fmt: skip
        self.roughest = max(self.roughest, worst)
        return t, moments[:, 0]

    def _run(self, light: np.ndarray, season: np.ndarray) -> tuple[np.ndarray, np.ndarray, int, float]:
        """Temperatures, moments, rounds, and the largest step of the last one as a share, for a full block."""
        from smallbody.heat._lag import _solve

        p, n, _ = light.shape
        t, moments, out = np.zeros((p, n, LANES)), np.zeros((p, 5, LANES)), np.zeros(3)
        # what the orbit conducts at a place for its own daily mean goes into the sums over its nodes: as part of the
        # sink, it would make dark ground that conducts little swing to and fro
        gamma = float(self.ground.thermal_inertia)
        weights = self.weights + (gamma * np.diag(season) / n)[:, None]
        _solve(
            light, weights, season, season.sum(axis=0), self.ground.emissivity * SIGMA, gamma, TOL, MOST_ROUNDS, t,
            np.zeros((p, LANES)), moments, np.zeros((p, LANES)), out,
        )  # fmt: skip
        return t, moments, int(out[0]), float(out[2])

    @cached_property
    def steady_season(self) -> np.ndarray:
        """The operator over the orbit for facets that `orbit_operator` does not settle."""
        return steady_orbit_operator(self.places)

    def excess(self, temperature_k: np.ndarray, absorbed_w_m2: np.ndarray) -> np.ndarray:
        """What the ground emits beyond what it absorbs: mean over a rotation, and mean times cos and sin of the Sun's
        body longitude; (3, p, L) W/m2."""
        from smallbody.heat._lag import _excess

        p, _, facets = temperature_k.shape
        out = np.empty((3, p, LANES))
        _excess(full_block(temperature_k), full_block(absorbed_w_m2), self.ground.emissivity * SIGMA, out)
        return out[:, :, :facets]


def full_block(table: np.ndarray) -> np.ndarray:
    """A table of at most LANES facets (last axis) as the kernels want it: idle lanes repeat the last facet."""
    idle = LANES - table.shape[-1]
    if idle:
        table = np.concatenate([table, np.repeat(table[..., -1:], idle, axis=-1)], axis=-1)
    return np.ascontiguousarray(table)
