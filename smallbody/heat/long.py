"""The lag solver for one long period: whole orbits of a body that turns slowly, node after node.

Where rotation and orbit are not far apart their harmonics mix, and the two clocks of `LagSolver` do not hold.
"""

from __future__ import annotations

import numpy as np

from smallbody.constants import SIGMA
from smallbody.errors import NotSettled, SizeMismatch
from smallbody.heat.lag import LANES, Ground, full_block, rotation_weights
from smallbody.workers import SILENT, Meter, share

NEAR = 192  # nodes whose heat a sweep follows node by node; older ones are added by Fourier transform between sweeps
TOL_K = 1e-2
MOST_SWEEPS = 400


def lag_period(
    ground: Ground, period_s: float, absorbed_w_m2: np.ndarray, *, meter: Meter = SILENT, threads: int = 0
) -> np.ndarray:
    """Surface temperatures of ground under light that repeats itself: (n, L), kelvin.

    ground : Ground
    period_s : after which the light repeats itself
    absorbed_w_m2 : (n, L) absorbed light at n equal steps of the period, for L facets
    raises : SizeMismatch; NotSettled
    source : convolution quadrature as in `rotation_weights`; the same answer as `march_period`, by another road
    """
    light = np.asarray(absorbed_w_m2, float)
    if light.ndim != 2 or len(light) < 8:
        raise SizeMismatch(f"absorbed light has shape {light.shape}, not steps by facets with at least 8 steps")
    out = np.empty_like(light)
    es = ground.emissivity * SIGMA
    if ground.thermal_inertia == 0.0:
        return np.asarray((light / es) ** 0.25)
    weights = rotation_weights(len(light), ground.thermal_inertia, 2 * np.pi / period_s)

    def work(start: int, end: int) -> None:
        out[:, start:end] = _settle(full_block(light[:, start:end]), es, weights)[:, : end - start]

    share(work, light.shape[1], LANES, meter=meter, task="heat of long periods", threads=threads)
    return out


def _settle(light: np.ndarray, es: float, weights: np.ndarray) -> np.ndarray:
    from scipy.fft import irfft, rfft

    from smallbody.heat._long import _sweep_near

    n = len(light)
    near = weights[: min(NEAR, n)].copy()
    far = weights.copy()
    far[: len(near)] = 0.0
    spectrum = rfft(far)[:, None]
    mean = light.mean(axis=0)
    t = np.ascontiguousarray(np.broadcast_to((mean / es) ** 0.25, light.shape))
    moments = np.empty((5, LANES))
    for _ in range(MOST_SWEEPS):
        known = light - irfft(spectrum * rfft(t, axis=0), n, axis=0) if len(near) < n else light
        _sweep_near(t, np.ascontiguousarray(known), near, es, moments)
        # conduction over a whole period adds up to nothing: move all nodes so that light and heat balance
        shift = np.zeros(LANES)
        for _ in range(30):
            rest = es * (
                moments[3] + shift * (4 * moments[2] + shift * (6 * moments[1] + shift * (4 * moments[0] + shift)))
            )
            slope = 4 * es * (moments[2] + shift * (3 * moments[1] + shift * (3 * moments[0] + shift)))
            step = (mean - rest) / np.maximum(slope, 1e-300)
            shift = np.maximum(shift + step, -0.9 * moments[0])
            if np.max(np.abs(step)) < 1e-9:
                break
        t += shift
        np.maximum(t, 0.0, out=t)
        moved = float(np.max(np.maximum(moments[4], np.abs(shift))))
        if moved <= TOL_K:
            return t
    raise NotSettled(
        f"temperatures still move by {moved:.2g} K after {MOST_SWEEPS} sweeps through a long period of {n} nodes",
        temperature_k=t,
        worst_k=moved,
    )
