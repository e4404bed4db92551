"""What there is to say about a shape."""

from __future__ import annotations

from typing import Any

from smallbody.shape.model import Shape


def describe(shape: Shape) -> dict[str, Any]:
    """To come."""
    raise NotImplementedError
