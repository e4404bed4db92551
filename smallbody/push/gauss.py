"""From a force round the orbit to mean rates of the six elements, and from a torque to rates of the spin."""

from __future__ import annotations

import numpy as np

from smallbody.constants import AU_M, DAY_S, GM_SUN, MYR_S, YEAR_S
from smallbody.light import Places

ORBIT_UNITS = {
    "da_dt_au_per_myr": "au/Myr",
    "da_dt_m_per_yr": "m/yr",
    "de_dt_per_myr": "1/Myr",
    "di_dt_deg_per_myr": "deg/Myr",
    "dnode_dt_deg_per_myr": "deg/Myr",
    "dperi_dt_deg_per_myr": "deg/Myr",
    "dmean_anomaly_dt_deg_per_myr": "deg/Myr",
}
SPIN_UNITS = {
    "domega_dt_rad_per_d2": "rad/d2",
    "dobliquity_dt_deg_per_myr": "deg/Myr",
    "dazimuth_dt_deg_per_myr": "deg/Myr",
}
DEG_PER_MYR = np.degrees(1.0) * MYR_S


def element_rates(places: Places, accel: np.ndarray, inclination: float, peri: float) -> dict[str, float]:
    """Orbit-averaged rates of the elements under a small acceleration; keys of ORBIT_UNITS.

    places : Places, p of them
    accel : (p, 3) m/s2, radial, transverse and normal
    inclination, peri : rad; argument of perihelion
    returns : at i = 0 (and 180 deg) there is no node, so its rate is NaN and that of the perihelion is the rate of its
        longitude; at e = 0 there is no perihelion, so its rate and the mean anomaly's are NaN
    source : Gauss's equations (Danby, Fundamentals of Celestial Mechanics, sec. 11.5; Murray & Dermott 1999, sec. 2.9).
        The mean anomaly's rate is that of its value at epoch, without the change that the drift in a makes in time.
    """
    r_, t_, w_ = accel.T
    a, e, n = places.a_m, places.e, places.mean_motion
    f, ecc, r = places.true_anomaly, places.eccentric_anomaly, places.distance_m
    root = np.sqrt(1 - e * e)
    p = a * (1 - e * e)
    h = n * a * a * root

    def mean(x: np.ndarray) -> float:
        return float(places.weight @ x)

    da = mean(2 / (n * root) * (e * np.sin(f) * r_ + p / r * t_))
    de = mean(root / (n * a) * (np.sin(f) * r_ + (np.cos(f) + np.cos(ecc)) * t_))
    di = mean(r * np.cos(peri + f) / h * w_)
    node_sin_i = mean(r * np.sin(peri + f) / h * w_)
    flat = abs(np.sin(inclination)) < 1e-12
    dnode = np.nan if flat else node_sin_i / np.sin(inclination)
    if e > 0:
        in_plane = mean(root / (n * a * e) * (-np.cos(f) * r_ + (1 + r / p) * np.sin(f) * t_))
        dperi = in_plane - (0.0 if flat else np.cos(inclination) * dnode)
        dm = mean(((p * np.cos(f) - 2 * e * r) * r_ - (p + r) * np.sin(f) * t_) / (n * a * a * e))
    else:
        dperi = dm = np.nan
    return {
        "da_dt_au_per_myr": da / AU_M * MYR_S,
        "da_dt_m_per_yr": da * YEAR_S,
        "de_dt_per_myr": de * MYR_S,
        "di_dt_deg_per_myr": di * DEG_PER_MYR,
        "dnode_dt_deg_per_myr": dnode * DEG_PER_MYR,
        "dperi_dt_deg_per_myr": dperi * DEG_PER_MYR,
        "dmean_anomaly_dt_deg_per_myr": dm * DEG_PER_MYR,
    }


def spin_rates(torque: np.ndarray, moment: float, omega: float, obliquity: float) -> dict[str, float]:
    """Rates of a principal-axis rotator; keys of SPIN_UNITS.

    torque : (3,) N m, mean torque along the pole, towards increasing obliquity and towards increasing azimuth
    moment : kg m2 about the spin axis; omega : rad/s; obliquity : rad
    returns : where the pole stands on the orbit normal it has no azimuth: that rate is NaN
    source : Euler's equation dL/dt = torque for L along the principal axis; the obliquity rate is
        ((tau.s) cos eps - tau.N)/(C omega sin eps) (Rubincam 2000, Icarus 148, 2), written with the unit vector
        towards increasing obliquity, which stays finite at the poles
    """
    along, up, round_ = torque
    upright = abs(np.sin(obliquity)) < 1e-9
    return {
        "domega_dt_rad_per_d2": along / moment * DAY_S**2,
        "dobliquity_dt_deg_per_myr": up / (moment * omega) * DEG_PER_MYR,
        "dazimuth_dt_deg_per_myr": np.nan if upright else round_ / (moment * omega * np.sin(obliquity)) * DEG_PER_MYR,
    }


def mean_coefficients(places: Places, accel: np.ndarray) -> tuple[float, float, float]:
    """A1, A2, A3 in au/d2: the accelerations A (1 au/r)^2 that stand for the given ones, radial, transverse, normal.

    A2 is the one whose transverse acceleration drifts the orbit as the given transverse one does, so that on its own
    da/dt = 2 A2 (1 au)^2/(n a^2 (1 - e^2)) (Farnocchia et al. 2013, Icarus 224, 1); A1 and A3 are averages of
    acceleration times (r/au)^2 over true anomaly, that is, over the light received.
    """
    r = places.distance_m
    light = places.weight / r**2
    light = light / light.sum()
    drift = places.weight / r**3
    drift = drift / drift.sum()
    scaled = accel * (r[:, None] / AU_M) ** 2 / AU_M * DAY_S**2
    return float(light @ scaled[:, 0]), float(drift @ scaled[:, 1]), float(light @ scaled[:, 2])


def drift_of_transverse(a2_au_per_d2: float, a_m: float, e: float) -> float:
    """da/dt in au/Myr of a transverse acceleration A2 (1 au/r)^2 (Farnocchia et al. 2013; Gauss's equations)."""
    n = np.sqrt(GM_SUN / a_m**3)
    a2 = a2_au_per_d2 * AU_M / DAY_S**2
    return float(2 * a2 * AU_M**2 / (n * a_m**2 * (1 - e * e)) / AU_M * MYR_S)
