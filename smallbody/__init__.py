"""How sunlight moves small bodies: from a faceted shape to drift and spin rates with their numerical errors.

Nothing heavy is imported until it is asked for.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

_WHERE = {
    "Body": "body", "Bulk": "body", "Orbit": "body", "ShapeSource": "body", "Solver": "body", "Spin": "body",
    "Surface": "body", "read_body": "body",
    "Shape": "shape", "read_shape": "shape", "write_shape": "shape", "check_shape": "shape", "mend_shape": "shape",
    "make_shape": "shape",
    "drift": "push", "Drift": "push", "Rate": "push", "sphere_drift": "push",
    "sweep": "batch",
    "save": "store", "load": "store",
    "draw": "figures",
    "SmallbodyError": "errors", "Note": "errors",
}  # fmt: skip

__all__ = ["__version__", *sorted(_WHERE)]

if TYPE_CHECKING:
    from smallbody.batch import sweep as sweep
    from smallbody.body import Body as Body
    from smallbody.body import Bulk as Bulk
    from smallbody.body import Orbit as Orbit
    from smallbody.body import ShapeSource as ShapeSource
    from smallbody.body import Solver as Solver
    from smallbody.body import Spin as Spin
    from smallbody.body import Surface as Surface
    from smallbody.body import read_body as read_body
    from smallbody.errors import Note as Note
    from smallbody.errors import SmallbodyError as SmallbodyError
    from smallbody.figures import draw as draw
    from smallbody.push import Drift as Drift
    from smallbody.push import Rate as Rate
    from smallbody.push import drift as drift
    from smallbody.push import sphere_drift as sphere_drift
    from smallbody.shape import Shape as Shape
    from smallbody.shape import check_shape as check_shape
    from smallbody.shape import make_shape as make_shape
    from smallbody.shape import mend_shape as mend_shape
    from smallbody.shape import read_shape as read_shape
    from smallbody.shape import write_shape as write_shape
    from smallbody.store import load as load
    from smallbody.store import save as save


def __getattr__(name: str) -> Any:
    if name in _WHERE:
        return getattr(importlib.import_module(f"smallbody.{_WHERE[name]}"), name)
    raise AttributeError(f"smallbody has no {name!r}; it has {', '.join(sorted(_WHERE))}")


def __dir__() -> list[str]:
    return __all__
