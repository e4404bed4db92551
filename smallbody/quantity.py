"""An array that knows the names of its axes and its unit: what results are handed to archive and pictures in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from smallbody.errors import SizeMismatch


@dataclass(frozen=True)
class Quantity:
    """A named-axes array.

    values : array of any shape
    dims : one name per axis of `values`
    units : unit as text; "1" for pure numbers
    about : one line that says what it is
    raises : SizeMismatch, if there is not one name per axis
    """

    values: np.ndarray
    dims: tuple[str, ...]
    units: str
    about: str

    def __post_init__(self) -> None:
        if np.ndim(self.values) != len(self.dims):
            raise SizeMismatch(f"{len(self.dims)} axis names {self.dims} for an array of {np.ndim(self.values)} axes")
