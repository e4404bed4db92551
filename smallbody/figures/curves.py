"""What changes with time: facets through a rotation, the force through the orbit."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from smallbody.errors import FigureError
from smallbody.figures import frame
from smallbody.figures.frame import COLUMN_IN, DASHES, SOURCE_LOOK, many, new_figure, typeset, values
from smallbody.store import Stored

LATITUDES_DEG = (60.0, 30.0, 0.0, -30.0, -60.0)
LINE_COLOURS = (frame.BLUE, frame.SKY, frame.BLACK, frame.ORANGE, frame.VERMILION, frame.GREEN, frame.PURPLE)
ROUND_OFF = 1e-9  # of the largest force: below it a component is zero


def rotation(stored: Stored, *, facets: Any = None, against: str = "hour_angle") -> Figure:
    """Absorbed sunlight and temperature of a few facets through a rotation, at perihelion.

    facets : their numbers, from 0; else five that nothing overshadows, their normals at latitudes 60, 30, 0, -30, -60
    against : "hour_angle" of the Sun, each facet by its own noon, or "phase" of the rotation, all by one clock
    """
    if against not in ("hour_angle", "phase"):
        raise FigureError(f"against: no {against!r}; there are hour_angle and phase")
    normals = _normals(stored)
    count = len(normals)
    chosen = _typical(stored, normals) if facets is None else [_facet(f, count) for f in many(facets)]
    if not 1 <= len(chosen) <= len(DASHES):
        raise FigureError(f"{len(chosen)} facets: from 1 to {len(DASHES)} can be told apart")
    sun = values(stored, "subsolar_longitude_deg")
    figure = new_figure(COLUMN_IN, 4.4)
    upper, lower = figure.subplots(2, 1, sharex=True)
    overshadowed = values(stored, "facet_overshadowed").astype(bool)
    for i, facet in enumerate(chosen):
        latitude = np.degrees(np.arcsin(np.clip(normals[facet, 2], -1, 1)))
        longitude = np.degrees(np.arctan2(normals[facet, 1], normals[facet, 0]))
        x = longitude - sun if against == "hour_angle" else sun[0] - sun
        label = f"{facet}: {_signed(latitude)}" + (" (overshadowed)" if overshadowed[facet] else "")
        look = {"color": LINE_COLOURS[i % len(LINE_COLOURS)], "linestyle": DASHES[i], "label": label}
        for axes, name in ((upper, "facet_absorbed_w_m2"), (lower, "facet_temperature_k")):
            axes.plot(*_round(x, values(stored, name)[facet], -180.0 if against == "hour_angle" else 0.0), **look)
    upper.set_ylabel(f"Absorbed sunlight ({typeset('W/m2')})")
    upper.set_ylim(bottom=0.0)
    lower.set_ylabel("Temperature (K)")
    if against == "hour_angle":
        lower.set_xlabel("Hour angle of the Sun (deg)")
        lower.set_xlim(-180, 180)
        upper.tick_params(top=False)
        clock = upper.secondary_xaxis("top", functions=(lambda h: h / 15.0 + 12.0, lambda t: (t - 12.0) * 15.0))
        clock.set_xlabel("Local solar time (1 h = 1/24 rotation)")
        clock.set_xticks(range(0, 25, 6))
        for axes in (upper, lower):
            axes.axvline(0.0, color="0.75", lw=0.6, zorder=0)
    else:
        lower.set_xlabel("Phase of rotation (deg)")
        lower.set_xlim(0, 360)
    lower.set_xticks(range(-180, 181, 90) if against == "hour_angle" else range(0, 361, 90))
    frame.panel_letters((upper, lower), inside=against == "hour_angle")
    figure.legend(
        *upper.get_legend_handles_labels(), loc="outside lower center", ncols=2 if overshadowed[chosen].any() else 3,
        title="facet: latitude of its normal", title_fontsize=7,
    )  # fmt: skip
    frame.title(figure, stored.name, "at perihelion")
    return figure


def _normals(stored: Stored) -> np.ndarray:
    a, b, c = np.moveaxis(values(stored, "vertex_m")[values(stored, "facet_vertex")], 1, 0)
    n = np.cross(b - a, c - a)
    return np.asarray(n / np.linalg.norm(n, axis=1, keepdims=True))


def _round(angle_deg: np.ndarray, y: np.ndarray, low: float) -> tuple[np.ndarray, np.ndarray]:
    """A curve over one turn, from `low`: closed where it comes back to its start, cut where it leaves the picture.

    That of a slow rotator does not come back: the Sun has moved on by the time the body has turned once.
    """
    last = angle_deg[-1] + (angle_deg[-1] - angle_deg[0]) / (len(angle_deg) - 1)
    if abs(abs(last - angle_deg[0]) - 360.0) < 1e-6:
        angle_deg, y = np.append(angle_deg, last), np.append(y, y[0])
    # each stretch that crosses an edge is drawn on both sides of it; what is beyond the axis is not seen
    turn = np.floor((angle_deg - low) / 360.0)
    xs, ys = [], []
    for k in np.arange(turn.min(), turn.max() + 1):
        xs += [*(angle_deg - 360.0 * k), np.nan]
        ys += [*y, np.nan]
    return np.array(xs), np.array(ys)


def _signed(degrees: float) -> str:
    whole = round(degrees)
    return ("+" if whole > 0 else "\u2212" if whole < 0 else "") + f"{abs(whole)}\u00b0"


def _facet(number: Any, count: int) -> int:
    if isinstance(number, bool) or not isinstance(number, int | np.integer) or not 0 <= number < count:
        raise FigureError(f"facets: {number!r} is not a number of a facet, 0 to {count - 1}")
    return int(number)


def _typical(stored: Stored, normals: np.ndarray) -> list[int]:
    """One facet near each of a few latitudes, free of shadows if there is one, all near one longitude."""
    latitude = np.degrees(np.arcsin(np.clip(normals[:, 2], -1, 1)))
    longitude = np.degrees(np.arctan2(normals[:, 1], normals[:, 0]))
    badness = np.abs(longitude) / 60.0 + 90.0 * values(stored, "facet_overshadowed")
    chosen = [int(np.argmin(np.abs(latitude - wish) + badness)) for wish in LATITUDES_DEG]
    return list(dict.fromkeys(chosen))


def season(stored: Stored) -> Figure:
    """Force through the orbit, by source, with the Sun's distance and latitude."""
    anomaly = values(stored, "place_mean_anomaly_deg")
    anomaly = (anomaly + 180.0) % 360.0 - 180.0
    order = np.argsort(anomaly, kind="stable")
    # once round, perihelion in the middle; the ends meet
    x = np.concatenate([[anomaly[order[-1]] - 360.0], anomaly[order], [anomaly[order[0]] + 360.0]])
    round_ = np.concatenate([[order[-1]], order, [order[0]]])
    force = values(stored, "force_n")
    largest = float(np.abs(force).max())
    figure = new_figure(COLUMN_IN, 6.6)
    panels = figure.subplots(5, 1, sharex=True, height_ratios=(1.3, 1.3, 1.3, 0.8, 0.8))
    sources = [str(s) for s in values(stored, "source")]
    for k, (axes, direction) in enumerate(zip(panels, values(stored, "orbit_axis"))):
        parts = force[:, round_, k]
        parts = np.where(np.abs(parts).max(axis=1, keepdims=True) > ROUND_OFF * largest, parts, 0.0)
        factor, power = frame.power_of_ten(parts)
        for source, part in zip(sources, parts):
            look = SOURCE_LOOK[source]
            axes.plot(x, part * factor, color=look["color"], linestyle=look["linestyle"], label=source)
        axes.set_ylabel(f"{str(direction).capitalize()}\nforce ({power}N)")
        axes.axhline(0.0, color="0.75", lw=0.6, zorder=0)
        if not parts.any():
            axes.set_ylim(-1, 1)
    _curve(panels[3], x, values(stored, "place_sun_distance_au")[round_], "Distance\n(au)")
    _curve(panels[4], x, values(stored, "place_subsolar_latitude_deg")[round_], "Sub-solar\nlatitude (deg)")
    for axes in panels:
        axes.axvline(0.0, color="0.6", lw=0.6, ls=(0, (4, 3)), zorder=0)
        axes.margins(y=0.12)
    panels[0].set_title("perihelion", fontsize=6.5, color="0.35", pad=2.5)
    panels[-1].set_xlim(-180, 180)
    panels[-1].set_xticks(range(-180, 181, 90))
    panels[-1].set_xlabel("Mean anomaly (deg)")
    frame.panel_letters(panels)
    figure.align_ylabels(panels)
    figure.legend(*panels[0].get_legend_handles_labels(), loc="outside lower center", ncols=3)
    frame.title(figure, stored.name, "mean over a rotation")
    return figure


def _curve(axes: Axes, x: np.ndarray, y: np.ndarray, label: str) -> None:
    axes.plot(x, y, color="0.2", lw=1.0)
    axes.set_ylabel(label)
    span = float(np.ptp(y))
    if span < 1e-9 * max(1.0, float(np.abs(y).max())):
        axes.set_ylim(y[0] - 0.5, y[0] + 0.5)
    elif label.startswith("Sub"):
        frame.degrees_axis(axes, "y", float(y.min()), float(y.max()))
