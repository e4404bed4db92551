"""Push: force and torque of sunlight and heat, and the mean rates of orbit and spin they make."""

from smallbody.push.gauss import drift_of_transverse, element_rates, spin_rates
from smallbody.push.rates import drift
from smallbody.push.result import Acceleration, Checks, Drift, OrbitRates, Rate, SourceRates, SpinRates
from smallbody.push.sphere import SphereDrift, lag_factor, sphere_drift

__all__ = [
    "Acceleration",
    "Checks",
    "Drift",
    "OrbitRates",
    "Rate",
    "SourceRates",
    "SphereDrift",
    "SpinRates",
    "drift",
    "drift_of_transverse",
    "element_rates",
    "lag_factor",
    "sphere_drift",
    "spin_rates",
]
