"""What a run answers: rates with their numerical errors, by source, and the arrays behind them."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from smallbody.errors import SmallbodyError
from smallbody.push.sphere import SphereDrift
from smallbody.quantity import Quantity

SOURCES = ("thermal", "scattered", "direct")


@dataclass(frozen=True)
class Rate:
    """A rate and its numerical error, in the unit that its name carries. Undefined rates are NaN."""

    value: float
    numerical_error: float

    def __float__(self) -> float:
        raise SmallbodyError("a rate has a value and a numerical_error: ask for one of them by name")

    @property
    def relative_error(self) -> float:
        """numerical_error over |value|; infinite for a rate of zero."""
        return self.numerical_error / abs(self.value) if self.value else math.inf


@dataclass(frozen=True)
class OrbitRates:
    """Mean rates of the orbital elements.

    At inclination 0 there is no node: its rate is NaN and dperi_dt is that of the longitude of perihelion. At
    eccentricity 0 there is no perihelion: its rate and the mean anomaly's are NaN.
    """

    da_dt_au_per_myr: Rate
    da_dt_m_per_yr: Rate
    de_dt_per_myr: Rate
    di_dt_deg_per_myr: Rate
    dnode_dt_deg_per_myr: Rate
    dperi_dt_deg_per_myr: Rate
    dmean_anomaly_dt_deg_per_myr: Rate


@dataclass(frozen=True)
class SpinRates:
    """Mean rates of the spin; dazimuth_dt is the pole's precession. doubling_time is omega over |domega/dt|.

    Where the pole stands on the orbit normal it has no azimuth: dazimuth_dt is NaN, and dobliquity_dt is the rate at
    which the pole leaves the normal towards the azimuth given.
    """

    domega_dt_rad_per_d2: Rate
    dobliquity_dt_deg_per_myr: Rate
    dazimuth_dt_deg_per_myr: Rate
    doubling_time_myr: Rate


@dataclass(frozen=True)
class SourceRates:
    """The rates that one source alone would make."""

    orbit: OrbitRates
    spin: SpinRates


@dataclass(frozen=True)
class Acceleration:
    """Mean accelerations in the law A (1 au/r)^2, and what sunlight is to the Sun's gravity.

    a1, a2, a3 : radial, transverse, normal, au/d2
    area_to_mass_m2_per_kg : mean lit cross-section over mass
    beta : mean radial push over the Sun's attraction
    numerical_error : of a1, a2, a3
    """

    a1_au_per_d2: float
    a2_au_per_d2: float
    a3_au_per_d2: float
    area_to_mass_m2_per_kg: float
    beta: float
    numerical_error: Mapping[str, float]


@dataclass(frozen=True)
class Checks:
    """What the run found out about itself.

    energy_balance : (emitted - absorbed)/absorbed over an orbit and the whole surface
    facets : number of facets
    overshadowed_fraction : share of the facets with something over their own plane
    rotations_per_orbit : sidereal
    direct_spin_residual : spin rate that the sampling of shadows leaves of directly arriving light, over the natural
        scale of spin rates; zero in truth (Nesvorny & Vokrouhlicky 2008), so it is in no rate but in their errors
    spin_scale_rad_per_d2 : that scale: mean sunlight/c times (diameter/2)^3 over the moment of inertia
    halved_shape : by how much each rate moves with half the facets, absolute, in its own unit; empty if not asked
    """

    energy_balance: float
    facets: int
    overshadowed_fraction: float
    rotations_per_orbit: float
    direct_spin_residual: float
    spin_scale_rad_per_d2: float
    sphere_da_dt_au_per_myr: float
    halved_shape: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Drift:
    """Mean rates at which sunlight changes a body's orbit and spin, with numerical errors; see `push.drift`."""

    name: str
    orbit: OrbitRates
    spin: SpinRates
    by_source: Mapping[str, SourceRates]
    acceleration: Acceleration
    checks: Checks
    provenance: Mapping[str, Any]
    sphere: SphereDrift
    notes: tuple[str, ...]
    arrays: Mapping[str, Quantity] = field(repr=False)

    def to_dict(self) -> dict[str, Any]:
        """The result without its arrays, ready for JSON: numbers that are not finite become None."""
        kept = {
            "name": self.name,
            "orbit": self.orbit,
            "spin": self.spin,
            "by_source": self.by_source,
            "acceleration": self.acceleration,
            "checks": self.checks,
            "provenance": self.provenance,
            "notes": list(self.notes),
        }
        return {key: _plain(value) for key, value in kept.items()}


def _plain(value: Any) -> Any:
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: _plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(v) for v in value]
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    return value
