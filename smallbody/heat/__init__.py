"""Heat: surface temperatures under changing sunlight, by the periodic lag solver or by its slow marching reference."""

from smallbody.heat.lag import LANES, Ground, LagSolver, orbit_operator, rotation_weights

__all__ = ["LANES", "Ground", "LagSolver", "orbit_operator", "rotation_weights"]
