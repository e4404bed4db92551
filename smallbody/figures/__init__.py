"""Figures: pictures of what a result file holds, ready for print."""

from __future__ import annotations

import inspect
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

from smallbody.errors import FigureError
from smallbody.store import Storable, Stored, load

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from smallbody.push import Drift

__all__ = ["KINDS", "draw"]

KINDS = {  # kind of result: kinds of picture, each a function of its module
    "drift": {"temperature": "maps", "light": "maps", "rotation": "curves", "season": "curves"},
    "sweep": {"rates": "rates"},
}


def draw(
    result: Path | str | Stored | Drift | Storable,
    kind: str | None = None,
    out: Path | str | None = None,
    **choices: Any,
) -> Figure:
    """A picture of a result.

    result : file of a result, folder of an unfinished sweep, or the result itself
    kind : of a drift: temperature, light, rotation, season; of a sweep: rates; else the first of these
    out : file to write, .png, .pdf or .svg; whole or not at all
    choices : of that kind of picture, see smallbody.figures.maps, .curves and .rates
    returns : matplotlib Figure, not in pyplot's list
    raises : FigureError, if the result has no such picture or the picture no such choice; StoreError, if a file cannot
        be read or written
    """
    import matplotlib

    from smallbody.figures import frame

    if out is not None:
        frame.ending_of(Path(out))
    stored = _stored(result)
    function = _drawing(stored, kind)
    style: Any = {**matplotlib.rcParamsDefault, **frame.STYLE}  # whatever the user has set for other pictures
    style.pop("backend", None)
    with matplotlib.rc_context(style):
        figure = function(stored, **choices)
        if out is not None:
            frame.write(figure, Path(out), stored.name)
    return figure


def _stored(result: Any) -> Stored:
    if isinstance(result, Stored):
        return result
    if hasattr(result, "stored"):
        return result.stored()  # type: ignore[no-any-return]
    if hasattr(result, "arrays"):
        return Stored("drift", result.arrays, {"name": result.name})
    if Path(result).is_dir():
        from smallbody.batch import so_far

        return so_far(result)
    return load(result)


def _drawing(stored: Stored, kind: str | None) -> Callable[..., Figure]:
    kinds = KINDS.get(stored.kind)
    if not kinds:
        raise FigureError(f"there are no pictures of a result of kind {stored.kind!r}")
    kind = kind or next(iter(kinds))
    if kind not in kinds:
        raise FigureError(f"no picture {kind!r} of a {stored.kind}; there are {', '.join(kinds)}")
    from importlib import import_module

    function: Callable[..., Figure] = getattr(import_module(f"smallbody.figures.{kinds[kind]}"), kind)

    def checked(stored: Stored, **choices: Any) -> Figure:
        taken = inspect.signature(function).parameters.values()
        names = [p.name for p in taken if p.kind is p.KEYWORD_ONLY]
        if not any(p.kind is p.VAR_KEYWORD for p in taken):
            for name in choices:
                if name not in names:
                    has = f"it has {', '.join(names)}" if names else "it has none"
                    raise FigureError(f"{kind} has no choice {name!r}; {has}")
        return function(stored, **choices)

    return checked
