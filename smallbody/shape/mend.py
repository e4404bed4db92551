"""Mending what needs no guess."""

from __future__ import annotations

from smallbody.shape.model import Shape


def mend_shape(shape: Shape) -> tuple[Shape, list[str]]:
    """To come."""
    raise NotImplementedError
