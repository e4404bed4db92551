"""Heat: surface temperatures under changing sunlight, by the periodic lag solver or by its slow marching reference."""

from smallbody.heat.lag import LANES, Ground, LagSolver, orbit_operator, rotation_weights
from smallbody.heat.long import lag_period
from smallbody.heat.march import march_period

__all__ = ["LANES", "Ground", "LagSolver", "lag_period", "march_period", "orbit_operator", "rotation_weights"]
