"""A result with numbers chosen for their looks, for tests that ask how a result is shown and not what it is."""

from __future__ import annotations

import math

import numpy as np

from smallbody.push import Acceleration, Checks, Drift, OrbitRates, Rate, SourceRates, SphereDrift, SpinRates
from smallbody.quantity import Quantity

ADVICE = "da_dt_au_per_myr: numerical error is 3.0 %, most of it from solver.orbit_places; raise solver.orbit_places"


def rates(factor: float) -> SourceRates:
    def rate(value: float, relative: float = 0.003) -> Rate:
        return Rate(factor * value, abs(factor * value) * relative)

    return SourceRates(
        OrbitRates(
            da_dt_au_per_myr=rate(-4.10312e-4),
            da_dt_m_per_yr=rate(-61.3812),
            de_dt_per_myr=rate(1.23456e-5, 0.03),
            di_dt_deg_per_myr=rate(0.0123456),
            dnode_dt_deg_per_myr=Rate(math.nan, math.nan),
            dperi_dt_deg_per_myr=rate(-123456.7),
            dmean_anomaly_dt_deg_per_myr=rate(3.0),
        ),
        SpinRates(
            domega_dt_rad_per_d2=rate(6.3e-8),
            dobliquity_dt_deg_per_myr=rate(-1155.4),
            dazimuth_dt_deg_per_myr=Rate(0.0, 0.0),
            doubling_time_myr=Rate(1.5, 0.01),
        ),
    )


def result(notes: tuple[str, ...] = (ADVICE,), spin: float = 1.0) -> Drift:
    total = rates(1.0)
    quiet = SpinRates(**{k: Rate(spin * r.value, spin * r.numerical_error) for k, r in vars(total.spin).items()})
    return Drift(
        name="pebble [not bold] :smile:",
        orbit=total.orbit,
        spin=quiet,
        by_source={"thermal": rates(0.9), "scattered": rates(0.1), "direct": rates(1e-15)},
        acceleration=Acceleration(
            a1_au_per_d2=1.2e-12,
            a2_au_per_d2=-4.5e-14,
            a3_au_per_d2=0.0,
            area_to_mass_m2_per_kg=1.4e-6,
            beta=1.1e-9,
            numerical_error={"a1_au_per_d2": 1e-15, "a2_au_per_d2": 1e-16, "a3_au_per_d2": 0.0},
        ),
        checks=Checks(
            energy_balance=-3.1e-7,
            facets=5120,
            overshadowed_fraction=0.123,
            rotations_per_orbit=1920.4,
            direct_spin_residual=0.002,
            spin_scale_rad_per_d2=1e-6,
            sphere_da_dt_au_per_myr=-3.9e-4,
        ),
        provenance={"diameter_km": 0.49, "mass_kg": 7.3e10, "nothing": math.nan},
        sphere=SphereDrift(-3.9e-4, -4.0e-4, 1e-5),
        notes=notes,
        arrays={"place_weight": Quantity(np.ones(1), ("place",), "1", "share of the orbital period")},
    )
