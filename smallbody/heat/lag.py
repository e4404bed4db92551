"""The periodic lag solver: surface temperatures without a depth grid, rotation and orbit together.

Below a facet the ground is a half-space, so the flux conducted into it is the thermal inertia times the half-derivative
in time of the surface temperature. Over a rotation that operator is a circulant by convolution quadrature (Lubich 1988,
Numerische Mathematik 52, 129) with the second-order backward-difference symbol; its weights form an M-matrix, so
temperatures stay positive whatever the inertia. Over the orbit it acts on the daily means.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from smallbody.constants import SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.light import Places

LANES = 16  # facets solved in lockstep, as in _lanes
TOL_K = 1e-2  # rounds end when none moved a node by more; what is then left is about a ninth of it
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
    from scipy.interpolate import CubicSpline

    count = len(places)
    if count < 3:
        return np.zeros((count, count))
    m = places.mean_anomaly
    gap = np.diff(np.append(m, m[0] + 2 * np.pi)).min()
    fine = 1 << int(np.clip(np.ceil(np.log2(16 * 2 * np.pi / gap)), 10, 18))
    times = 2 * np.pi * np.arange(fine) / fine
    s = _running_number(m, times)
    unit = np.sqrt(1j * np.arange(fine // 2 + 1) * places.mean_motion)
    out = np.empty((count, count))
    for q in range(count):
        card = np.zeros(count + 1)
        card[q] = 1.0
        card[count] = card[0]
        spline = CubicSpline(np.arange(count + 1), card, bc_type="periodic")
        half = np.fft.irfft(unit * np.fft.rfft(spline(np.mod(s, count))), fine)
        out[:, q] = CubicSpline(np.append(times, 2 * np.pi), np.append(half, half[0]), bc_type="periodic")(m)
    out -= np.diag(out.sum(axis=1))  # a constant conducts nothing
    return out - places.weight @ out  # and over a whole orbit nothing is conducted in the mean


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
    rates : (p,) rad/s, of the Sun over the ground at each place
    """

    def __init__(self, ground: Ground, places: Places, nodes: int, rates: np.ndarray) -> None:
        if len(rates) != len(places):
            raise SizeMismatch(f"{len(rates)} rates for {len(places)} places")
        self.ground, self.places, self.nodes = ground, places, nodes
        w = np.array([rotation_weights(nodes, ground.thermal_inertia, r) for r in rates])
        self.weights = np.ascontiguousarray(np.concatenate([w[:, ::-1], w[:, ::-1]], axis=1))
        self.season = orbit_operator(places) if ground.thermal_inertia > 0 else np.zeros((len(places),) * 2)

    def solve(self, absorbed_w_m2: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Surface temperatures (p, n, L) and their daily means (p, L), K, for absorbed sunlight (p, n, L) in W/m2.

        raises : SizeMismatch; NotSettled, if the iteration does not end (temperatures so far are in the details)
        """
        from smallbody.heat._lag import _solve

        p, n, facets = absorbed_w_m2.shape
        if (p, n) != (len(self.places), self.nodes):
            raise SizeMismatch(
                f"absorbed light is {p} places by {n} nodes, the solver {len(self.places)} by {self.nodes}"
            )
        if facets > LANES:
            raise SizeMismatch(f"absorbed light of {facets} facets; a block has at most {LANES}")
        t, moments, out = np.zeros((p, n, LANES)), np.zeros((p, 5, LANES)), np.zeros(3)
        es = self.ground.emissivity * SIGMA
        _solve(
            full_block(absorbed_w_m2), self.weights, self.season, es,
            float(self.ground.thermal_inertia), TOL_K, MOST_ROUNDS, t, np.zeros((p, LANES)), moments,
            np.zeros((p, LANES)), out,
        )  # fmt: skip
        if not out[2] <= TOL_K:
            raise NotSettled(
                f"temperatures still move by {out[2]:.2g} K after {int(out[0])} rounds; try other numbers of "
                f"rotation nodes (now {n}) or orbit places (now {p})",
                temperature_k=t, rounds=int(out[0]), worst_k=float(out[2]),
            )  # fmt: skip
        return t[:, :, :facets], moments[:, 0, :facets]

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
