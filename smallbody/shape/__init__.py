"""Facets and mass: reading, writing, checking, mending and making closed shapes; nothing here knows of the Sun.

Nothing heavy is imported until it is asked for.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

_WHERE = {
    "Shape": "model", "MassProperties": "model", "Source": "model", "Made": "model",
    "read_shape": "files", "write_shape": "files", "parse_shape": "files", "shape_bytes": "files", "FORMATS": "files",
    "Fault": "check", "check_shape": "check", "require_usable": "check",
    "mend_shape": "mend",
    "make_shape": "make", "KINDS": "make",
    "prepare_shape": "prepare",
    "describe": "summary",
    "facet_samples": "sampling",
}  # fmt: skip

__all__ = sorted(_WHERE)

if TYPE_CHECKING:
    from smallbody.shape.check import Fault as Fault
    from smallbody.shape.check import check_shape as check_shape
    from smallbody.shape.check import require_usable as require_usable
    from smallbody.shape.files import FORMATS as FORMATS
    from smallbody.shape.files import parse_shape as parse_shape
    from smallbody.shape.files import read_shape as read_shape
    from smallbody.shape.files import shape_bytes as shape_bytes
    from smallbody.shape.files import write_shape as write_shape
    from smallbody.shape.make import KINDS as KINDS
    from smallbody.shape.make import make_shape as make_shape
    from smallbody.shape.mend import mend_shape as mend_shape
    from smallbody.shape.model import Made as Made
    from smallbody.shape.model import MassProperties as MassProperties
    from smallbody.shape.model import Shape as Shape
    from smallbody.shape.model import Source as Source
    from smallbody.shape.prepare import prepare_shape as prepare_shape
    from smallbody.shape.sampling import facet_samples as facet_samples
    from smallbody.shape.summary import describe as describe


def __getattr__(name: str) -> Any:
    if name in _WHERE:
        return getattr(importlib.import_module(f"smallbody.shape.{_WHERE[name]}"), name)
    raise AttributeError(f"smallbody.shape has no {name!r}; it has {', '.join(sorted(_WHERE))}")


def __dir__() -> list[str]:
    return __all__
