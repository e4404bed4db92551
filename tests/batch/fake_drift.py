"""A stand-in for the engine: rates from plain formulas, at once, so that the sweep itself can be put to the test."""

import math
import time

from smallbody.body import Body, Bulk, Orbit, ShapeSource, Solver, Spin, Surface
from smallbody.errors import NotSettled
from smallbody.push import Acceleration, Checks, Drift, OrbitRates, Rate, SourceRates, SphereDrift, SpinRates

SHARES = {"thermal": 0.9, "scattered": 0.07, "direct": 0.03}

BODY = Body(
    name="stand-in",
    shape=ShapeSource(sphere_facets=80, diameter_km=0.5),
    bulk=Bulk(density_kg_m3=2000.0),
    surface=Surface(bond_albedo=0.05, emissivity=0.9, thermal_inertia=200.0),
    spin=Spin(period_h=5.0, obliquity_deg=30.0),
    orbit=Orbit(a_au=1.2, e=0.1),
    solver=Solver(lit_samples=1, rotation_nodes=16),
)


def rates(body: Body, share: float) -> SourceRates:
    value = share * math.cos(body.obliquity) * body.surface.thermal_inertia / body.bulk.density_kg_m3

    def rate(factor: float) -> Rate:
        return Rate(value * factor, abs(value) * 1e-3)

    return SourceRates(
        OrbitRates(*(rate(k) for k in (1.0, 150.0, 0.1, 0.2)), Rate(math.nan, math.nan), rate(0.3), rate(0.4)),
        SpinRates(rate(1e-8), rate(2.0), rate(3.0), Rate(math.inf, math.inf)),
    )


class Engine:
    """Counts its calls; fails where told; can be slow; can stop the run, as Ctrl-C does."""

    def __init__(self, seconds: float = 0.0, fails=lambda body: None, stop_at: int | None = None) -> None:
        self.seconds, self.fails, self.stop_at, self.calls = seconds, fails, stop_at, []

    def __call__(self, body, *, shape=None, horizons=None, meter=None) -> Drift:
        if self.stop_at == len(self.calls):
            raise KeyboardInterrupt
        self.calls.append((body, shape, horizons))
        time.sleep(self.seconds)
        if (fault := self.fails(body)) is not None:
            raise fault
        total = rates(body, 1.0)
        return Drift(
            name=body.name,
            orbit=total.orbit,
            spin=total.spin,
            by_source={source: rates(body, share) for source, share in SHARES.items()},
            acceleration=Acceleration(0.0, 0.0, 0.0, 0.0, 0.0, {}),
            checks=Checks(1e-8, len(shape.facets), 0.0, 2000.0, 0.0, 1e-6, 0.5),
            provenance={},
            sphere=SphereDrift(0.5 * math.cos(body.obliquity), 0.0, 0.0),
            notes=("raise something",) if body.surface.thermal_inertia > 900 else (),
            arrays={},
        )


def not_above(limit_deg: float):
    """Fails for obliquities above a limit."""
    return lambda body: NotSettled("facets still move\nby 3 K") if body.spin.obliquity_deg > limit_deg else None
