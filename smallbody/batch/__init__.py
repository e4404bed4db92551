"""Batch: one description, many computations, kept as they are done and taken up again where they were stopped."""

from smallbody.batch.grid import Sweep, so_far, sweep, unit_of

__all__ = ["Sweep", "so_far", "sweep", "unit_of"]
