"""Linear theory of a sphere: the drift to expect before any facet is looked at."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from smallbody.constants import AU_M, C_M_S, GM_SUN, MYR_S, SIGMA
from smallbody.light import mean_sunlight


@dataclass(frozen=True)
class SphereDrift:
    """Mean drift of a homogeneous sphere, au/Myr: in total, by the diurnal and by the seasonal effect."""

    da_dt_au_per_myr: float
    diurnal_au_per_myr: float
    seasonal_au_per_myr: float


def lag_factor(theta: float, radius_in_skins: float | None = None) -> float:
    """The factor F of the linear theory: what a thermal parameter makes of the heat of the first harmonic.

    theta : thermal parameter Gamma sqrt(w)/(eps sigma T*^3)
    radius_in_skins : radius over penetration depth sqrt(k/(rho c w)); None for a large body
    returns : 0.5 theta/(1 + theta + 0.5 theta^2) for a large body; the finite one solves heat conduction inside the
        sphere for its first harmonic exactly, which is what the coefficients of the published theory are made of
    source : Vokrouhlicky 1998, A&A 335, 1093; 1999, A&A 344, 362
    """
    if theta <= 0.0:
        return 0.0
    # linearised surface: (4 eps sigma Tm^3) dT + K d(dT)/dr = absorbed, with 4 Tm^3 = sqrt(2) T*^3 (Tm^4 = T*^4/4);
    # dT inside goes as j1(k r), k^2 = -i w rho c/K, so conduction answers with K k j1'(kR)/j1(kR)
    if radius_in_skins is None:
        answer = np.exp(1j * np.pi / 4)
    else:
        x = radius_in_skins * np.exp(-1j * np.pi / 4)  # k R, in units of the depth sqrt(K/(rho c w))
        if radius_in_skins < 0.02:  # the first terms of the series: what follows would be a difference of equals
            slope_over_j1 = (1 - 0.3 * x**2) / (x * (1 - 0.1 * x**2))
        else:
            tan = np.tan(x) if radius_in_skins < 300.0 else -1j  # sine and cosine themselves overflow
            j0, j1 = tan / x, tan / x**2 - 1 / x  # both over cos x
            slope_over_j1 = (j0 - 2 * j1 / x) / j1
        answer = np.exp(-1j * np.pi / 4) * slope_over_j1
    return float(-np.imag(1.0 / (1.0 + theta / np.sqrt(2.0) * answer)))


def sphere_drift(
    *,
    radius_m: float,
    density_kg_m3: float,
    bond_albedo: float,
    emissivity: float,
    thermal_inertia: float,
    period_h: float,
    obliquity_deg: float,
    a_au: float,
    e: float = 0.0,
    heat_capacity_density: float | None = None,
) -> SphereDrift:
    """Linear theory of the Yarkovsky effect on a sphere.

    radius_m, density_kg_m3 (bulk), thermal_inertia (J m-2 K-1 s-1/2), period_h : of the body
    heat_capacity_density : density times specific heat of the surface, J m-3 K-1; given, the heat wave may fill the
        body (finite radius), else the body is large
    e : the theory is for circular orbits; an eccentric one is replaced by the circular one with the same mean sunlight
    source : Vokrouhlicky 1998, 1999; review Bottke et al. 2006, Annu. Rev. Earth Planet. Sci. 34, 157
    """
    a = a_au * AU_M
    flux = mean_sunlight(a, e)
    n = np.sqrt(GM_SUN / a**3)
    omega = 2 * np.pi / (period_h * 3600)
    cos_eps = np.cos(np.radians(obliquity_deg))
    phi = 3 * flux / (4 * radius_m * density_kg_m3 * C_M_S)  # pi R^2 S/(m c)
    absorbed = (1 - bond_albedo) * flux
    if absorbed == 0.0:
        return SphereDrift(0.0, 0.0, 0.0)
    hot = (absorbed / (emissivity * SIGMA)) ** 0.75

    def factor(rate: float) -> float:
        theta = thermal_inertia * np.sqrt(rate) / (emissivity * SIGMA * hot)
        if heat_capacity_density is None or thermal_inertia == 0.0:
            return lag_factor(theta)
        depth = thermal_inertia / heat_capacity_density / np.sqrt(rate)  # sqrt(k/(rho c w)), k = Gamma^2/(rho c)
        return lag_factor(theta, radius_m / depth)

    unit = (1 - bond_albedo) * phi / n * MYR_S / AU_M
    diurnal = 8 / 9 * unit * factor(omega) * cos_eps
    seasonal = -4 / 9 * unit * factor(n) * (1 - cos_eps**2)
    return SphereDrift(float(diurnal + seasonal), float(diurnal), float(seasonal))
