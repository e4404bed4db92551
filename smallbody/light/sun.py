"""Where the Sun is: Kepler's equation, the places at which an orbit is sampled, and the Sun's latitude on the body."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from smallbody.constants import GM_SUN, SUN_W

CELLS = 1024  # of the look-up that ranks a latitude among the places


def eccentric_anomaly(mean_anomaly: np.ndarray | float, e: float) -> np.ndarray:
    """Solve Kepler's equation M = E - e sin E for E, rad, any shape, to round-off.

    mean_anomaly : rad, any number of turns (E has as many)
    e : 0 <= e < 1
    raises : ValueError, if e is outside that range
    source : Newton's iteration on a convex branch, kept inside a bracket (textbook)
    """
    if not 0.0 <= e < 1.0:
        raise ValueError(f"eccentricity {e}: Kepler's equation in this form needs 0 <= e < 1")
    m = np.asarray(mean_anomaly, float)
    turns = np.round(m / (2 * np.pi))
    x = m - 2 * np.pi * turns
    a = np.abs(x)
    low, high = a, np.minimum(a + e, np.pi)
    ecc = np.minimum(a + 0.85 * e, np.pi)
    for _ in range(60):
        gap = ecc - e * np.sin(ecc) - a
        high = np.where(gap > 0, ecc, high)
        low = np.where(gap <= 0, ecc, low)
        new = ecc - gap / np.maximum(1 - e * np.cos(ecc), 1e-12)
        new = np.where((new < low) | (new > high), 0.5 * (low + high), new)
        if np.all(np.abs(new - ecc) <= 4e-16 * (1 + np.abs(ecc))):
            ecc = new
            break
        ecc = new
    return np.sign(x) * ecc + 2 * np.pi * turns


def true_anomaly(eccentric: np.ndarray | float, e: float) -> np.ndarray:
    """True anomaly of an eccentric anomaly, rad, with the same number of turns (textbook)."""
    ecc = np.asarray(eccentric, float)
    beta = e / (1 + np.sqrt(1 - e * e))
    return ecc + 2 * np.arctan2(beta * np.sin(ecc), 1 - beta * np.cos(ecc))


@dataclass(frozen=True)
class Places:
    """Places round an orbit, in the order of time, beginning at or after perihelion; all arrays (p,).

    mean_anomaly, eccentric_anomaly, true_anomaly : rad
    distance_m : from the Sun
    weight : share of the orbital period that a place stands for; they add up to 1
    flux_w_m2 : sunlight through a surface facing the Sun
    to_sun : (p, 3) unit vector from the body to the Sun in the orbit frame: x to perihelion, z along the orbit normal
    true_rate : rate of the true anomaly, rad/s
    """

    a_m: float
    e: float
    mean_anomaly: np.ndarray
    eccentric_anomaly: np.ndarray
    true_anomaly: np.ndarray
    distance_m: np.ndarray
    weight: np.ndarray
    flux_w_m2: np.ndarray
    to_sun: np.ndarray
    true_rate: np.ndarray

    def __len__(self) -> int:
        return len(self.weight)

    @property
    def mean_motion(self) -> float:
        """rad/s."""
        return float(np.sqrt(GM_SUN / self.a_m**3))


def places_at(a_m: float, e: float, mean_anomaly: np.ndarray, weight: np.ndarray) -> Places:
    """Places at given mean anomalies with given weights."""
    ecc = eccentric_anomaly(mean_anomaly, e)
    f = true_anomaly(ecc, e)
    r = a_m * (1 - e * np.cos(ecc))
    n = np.sqrt(GM_SUN / a_m**3)
    return Places(
        a_m=a_m,
        e=e,
        mean_anomaly=np.asarray(mean_anomaly, float),
        eccentric_anomaly=ecc,
        true_anomaly=f,
        distance_m=r,
        weight=np.asarray(weight, float),
        flux_w_m2=SUN_W / (4 * np.pi * r**2),
        to_sun=np.stack([-np.cos(f), -np.sin(f), np.zeros_like(f)], axis=-1),
        true_rate=n * np.sqrt(1 - e * e) * (a_m / r) ** 2,
    )


def places_in_true_anomaly(a_m: float, e: float, count: int) -> Places:
    """Equal steps of true anomaly: each place then receives the same sunlight, which suits what follows light alone."""
    f = 2 * np.pi * np.arange(count) / count
    ecc = f - 2 * np.arctan2(e * np.sin(f), 1 + np.sqrt(1 - e * e) + e * np.cos(f))
    m = ecc - e * np.sin(ecc)
    r = 1 - e * np.cos(ecc)
    return places_at(a_m, e, m, r**2 / (np.sum(r**2)))


def places_between(a_m: float, e: float, count: int) -> Places:
    """Equal steps of the anomaly s with dt proportional to r^(3/2) ds, half-way between eccentric and true anomaly.

    Heat needs places near perihelion, where it is gained, and near aphelion, where it is kept: equal steps of true
    anomaly leave the far half empty, equal steps of time the near half.
    """
    # ds = r^(-3/2) dM = (1 - e cos E)^(-1/2) dE: smooth and periodic, so that Fourier series integrate it exactly
    fine = 4096
    grid = 2 * np.pi * np.arange(fine) / fine
    rate = (1 - e * np.cos(grid)) ** -0.5
    modes = np.fft.rfft(rate) / fine
    k = np.arange(1, len(modes))
    base = modes[0].real

    def s_of(x: np.ndarray) -> np.ndarray:
        wave = modes[1:, None] / (1j * k[:, None]) * np.exp(1j * k[:, None] * x[None, :])
        return np.asarray(x + 2 * np.sum(wave.real, axis=0) / base)

    s = 2 * np.pi * np.arange(count) / count
    ecc = s.copy()
    keep = np.abs(modes[1:]) > 1e-17 * base
    modes, k = np.concatenate([modes[:1], modes[1:][keep]]), k[keep]
    zero = s_of(np.zeros(1))[0]
    for _ in range(50):
        gap = s_of(ecc) - zero - s
        step = gap * base * np.sqrt(1 - e * np.cos(ecc))
        ecc = ecc - step
        if np.max(np.abs(step)) < 1e-14:
            break
    m = ecc - e * np.sin(ecc)
    dt = (1 - e * np.cos(ecc)) ** 1.5
    return places_at(a_m, e, m, dt / dt.sum())


def mean_sunlight(a_m: float, e: float) -> float:
    """Sunlight through a surface facing the Sun, mean in time over an orbit, W/m2 (the mean of r^-2, exactly)."""
    return float(SUN_W / (4 * np.pi * a_m * a_m * np.sqrt(1 - e * e)))


def pole_vector(obliquity: float, azimuth: float) -> np.ndarray:
    """Spin pole in the orbit frame, (3,); azimuth from perihelion in the sense of motion, rad."""
    return np.array(
        [np.sin(obliquity) * np.cos(azimuth), np.sin(obliquity) * np.sin(azimuth), np.cos(obliquity)]
    )  # fmt: skip


@dataclass(frozen=True)
class SunOnBody:
    """The Sun as a spinning body sees it from each place; arrays (p,).

    sin_latitude, cos_latitude : of the subsolar point
    axes : (p, 3, 3) rows x, y, z of the frame in which the spin pole is z and the Sun has no y, in the orbit frame
    ascension : longitude of the Sun in a frame with that z that does not spin, rad
    ascension_rate : its rate, rad/s
    """

    sin_latitude: np.ndarray
    cos_latitude: np.ndarray
    axes: np.ndarray
    ascension: np.ndarray
    ascension_rate: np.ndarray

    @cached_property
    def ranks(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Places in ascending order of the Sun's latitude, (p,); their sin_latitude, (p,); and how many of these are
        below -1 + 2 i/CELLS, (CELLS + 1,), which finds a latitude's rank among them without a search."""
        order = np.argsort(self.sin_latitude, kind="stable")
        ranked = self.sin_latitude[order]
        return order, ranked, np.searchsorted(ranked, np.linspace(-1.0, 1.0, CELLS + 1))


def sun_on_body(places: Places, obliquity: float, azimuth: float) -> SunOnBody:
    """Latitude of the Sun and the frame that follows it, for a pole that stays fixed in space through one orbit."""
    z = pole_vector(obliquity, azimuth)
    u = places.to_sun
    sin_lat = np.clip(u @ z, -1.0, 1.0)
    flat = u - sin_lat[:, None] * z
    cos_lat = np.linalg.norm(flat, axis=1)
    spare = np.array([0.0, 0.0, 1.0]) - z[2] * z
    if np.linalg.norm(spare) < 1e-6:
        spare = np.array([1.0, 0.0, 0.0]) - z[0] * z
    spare /= np.linalg.norm(spare)
    x = np.where(cos_lat[:, None] > 1e-9, flat / np.maximum(cos_lat, 1e-9)[:, None], spare)
    y = np.cross(z, x)
    rate = places.true_rate * np.cos(obliquity) / np.maximum(cos_lat**2, 1e-6)
    return SunOnBody(
        sin_latitude=sin_lat,
        cos_latitude=np.sqrt(np.maximum(0.0, 1 - sin_lat**2)),
        axes=np.stack([x, y, np.broadcast_to(z, x.shape)], axis=1),
        ascension=np.arctan2(u @ np.cross(z, spare), u @ spare),
        ascension_rate=rate,
    )
