"""What all pictures share: type sizes for a printed column, colours everybody can tell apart, numbers with units."""

from __future__ import annotations

import io
import math
import re
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MultipleLocator

from smallbody.errors import FigureError
from smallbody.store import Stored, commit

COLUMN_IN = 3.5  # width of a column of the usual journals, 89 mm
PAGE_IN = 7.1  # of a page
ENDINGS = ("png", "pdf", "svg")
STYLE = {
    "font.family": "DejaVu Sans",  # comes with matplotlib: the same picture everywhere
    "font.size": 8.0,
    "axes.titlesize": 8.0,
    "axes.labelsize": 8.0,
    "xtick.labelsize": 7.0,
    "ytick.labelsize": 7.0,
    "legend.fontsize": 7.0,
    "figure.titlesize": 8.5,
    "axes.linewidth": 0.6,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "xtick.top": True,
    "ytick.right": True,
    "lines.linewidth": 1.2,
    "lines.markersize": 3.5,
    "legend.frameon": False,
    "figure.dpi": 150.0,
    "savefig.dpi": 300.0,
    "pdf.fonttype": 42,  # text stays text
    "svg.hashsalt": "smallbody",  # the same picture, the same bytes
    "axes.formatter.use_mathtext": True,
}
# Eight colours told apart with any kind of colour vision (Okabe & Ito 2008, Color Universal Design); yellow is left out
BLACK, ORANGE, SKY, GREEN, BLUE, VERMILION, PURPLE = (
    "#000000", "#E69F00", "#56B4E9", "#009E73", "#0072B2", "#D55E00", "#CC79A7",
)  # fmt: skip
# and each with a line and a mark of its own, for print without colour
SOURCE_LOOK: dict[str, dict[str, Any]] = {
    "total": {"color": BLACK, "linestyle": "-", "marker": "o"},
    "thermal": {"color": VERMILION, "linestyle": "--", "marker": "s"},
    "scattered": {"color": BLUE, "linestyle": "-.", "marker": "^"},
    "direct": {"color": GREEN, "linestyle": ":", "marker": "D"},
}
DASHES: tuple[Any, ...] = ("-", "--", "-.", ":", (0, (5, 1)), (0, (3, 1, 1, 1, 1, 1)), (0, (1, 1)), (0, (8, 2)))
MARKS = "os^Dv<>P"


def new_figure(width_in: float, height_in: float) -> Figure:
    """A figure of its own, in no global list."""
    return Figure(figsize=(width_in, height_in), layout="constrained")


def values(stored: Stored, name: str) -> np.ndarray:
    """A quantity of the file.

    raises : FigureError, if the file has none of that name
    """
    if name not in stored.arrays:
        raise FigureError(f"this file has no {name}, which the picture is made of")
    return np.asarray(stored.arrays[name].values)


def title(figure: Figure, *parts: str) -> None:
    """Name of the body, and what else must be said; text as it is, dollar signs and all."""
    figure.suptitle(", ".join(p for p in parts if p), parse_math=False)


def power_of_ten(*arrays: np.ndarray) -> tuple[float, str]:
    """A factor that brings values to a handy size, and what to put before the unit for it."""
    finite = [np.abs(a[np.isfinite(a)]).max(initial=0.0) for a in arrays]
    largest = max(finite, default=0.0)
    power = math.floor(math.log10(largest)) if largest > 0 else 0
    if -2 <= power <= 3:
        return 1.0, ""
    return 10.0**-power, f"$10^{{{power}}}$ "


def typeset(unit: str) -> str:
    """A unit with its powers raised and no fraction bar: "kg/m3" and "J m-2 K-1 s-1/2" as they are printed."""
    words = []
    for part in unit.split():
        over, *under = [part] if re.fullmatch(r"[A-Za-z]+-?\d+/\d+", part) else part.split("/")
        for piece, sign in ((over, ""), *((u, "-") for u in under)):
            stem = piece.rstrip("0123456789/-")
            power = piece[len(stem) :] or ("1" if sign else "")
            if stem:
                words.append(f"{stem}$^{{{sign}{power}}}$" if power else stem)
    return " ".join(words)


def degrees_axis(axes: Axes, which: str, low: float, high: float) -> None:
    """Ticks where one counts degrees."""
    span = high - low
    step = 90 if span > 270 else 45 if span > 135 else 30 if span > 60 else 15 if span > 30 else None
    if step is not None:
        getattr(axes, f"{which}axis").set_major_locator(MultipleLocator(step))


def many(value: Any) -> list[Any]:
    """One or several, as a list."""
    if isinstance(value, str) or not isinstance(value, Iterable):
        return [value]
    return list(value)


def panel_letters(axes: Iterable[Axes], inside: bool = False) -> None:
    """(a), (b), ... at the upper left corners, so that a text can speak of them."""
    several = list(axes)
    for letter, one in zip("abcdefghijkl" if len(several) > 1 else "", several):
        if inside:
            one.annotate(
                f"({letter})", (0, 1), xytext=(6, -5), xycoords="axes fraction", textcoords="offset points", ha="left",
                va="top", fontsize=7,
            )  # fmt: skip
        else:
            one.set_title(f"({letter})", loc="left", fontsize=7, pad=2.5)


def ending_of(out: Path) -> str:
    """Format of the picture, from the file's name.

    raises : FigureError
    """
    ending = out.suffix.lower().lstrip(".")
    if ending not in ENDINGS:
        raise FigureError(f"{out}: a picture ends in .{', .'.join(ENDINGS[:-1])} or .{ENDINGS[-1]}")
    return ending


def write(figure: Figure, out: Path, name: str) -> None:
    """The picture to a file, whole or not at all; the same picture, the same bytes.

    raises : StoreError, if it cannot be written
    """
    ending = ending_of(out)
    plain: Mapping[str, Mapping[str, Any]] = {
        "png": {"Title": name, "Software": None},
        "pdf": {"Title": name, "CreationDate": None},
        "svg": {"Title": name, "Date": None},
    }
    buffer = io.BytesIO()
    figure.savefig(buffer, format=ending, metadata=plain[ending])
    commit(out, buffer.getvalue())
