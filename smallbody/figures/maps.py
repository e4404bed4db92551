"""What the facets show: maps of temperature and light on the body itself, as seen from afar."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.collections import PolyCollection
from matplotlib.colors import Normalize
from matplotlib.figure import Figure
from matplotlib.patheffects import withStroke

from smallbody.errors import FigureError
from smallbody.figures.frame import COLUMN_IN, PAGE_IN, many, title, typeset, values
from smallbody.store import Stored

VIEWS = {  # name: title; where the viewer is, is in _viewer
    "front": "From the Sun",
    "back": "Night side",
    "morning": "Morning side",
    "evening": "Evening side",
    "north": "North pole",
    "south": "South pole",
}
RASTER_FACETS = 4000  # more facets than this are drawn as an image within pdf and svg
SUN = "#B36B00"  # colour of what is said of the Sun
HALO = withStroke(linewidth=2.2, foreground="white")  # what is black shows on dark ground too
UNIT_Z = np.array([0.0, 0.0, 1.0])


def temperature(stored: Stored, *, views: Any = ("front", "back", "north", "south"), phase_deg: Any = 0.0,
                colours: str = "inferno", low: float | None = None, high: float | None = None) -> Figure:  # fmt: skip
    """Surface temperature at perihelion.

    views : any of front, back, morning, evening, north, south
    phase_deg : how far the body has turned, degrees; several make a row of views each
    colours : name of a matplotlib colour map
    low, high : ends of the colour bar, K
    """
    return _maps(stored, "facet_temperature_k", "Surface temperature", views, phase_deg, colours, low, high)


def light(stored: Stored, *, views: Any = ("front", "back", "north", "south"), phase_deg: Any = 0.0,
          colours: str = "cividis", low: float | None = None, high: float | None = None) -> Figure:  # fmt: skip
    """Absorbed sunlight at perihelion; choices as for temperature, low and high in W/m2."""
    return _maps(stored, "facet_absorbed_w_m2", "Absorbed sunlight", views, phase_deg, colours, low, high)


def sun_directions(stored: Stored) -> np.ndarray:
    """(rotation, 3) unit vectors from the body to the Sun, body frame, at perihelion."""
    true_anomaly = values(stored, "place_true_anomaly_deg")
    latitude = np.radians(np.interp(0.0, true_anomaly, values(stored, "place_subsolar_latitude_deg"), period=360.0))
    longitude = np.radians(values(stored, "subsolar_longitude_deg"))
    flat = np.cos(latitude)
    return np.stack(
        [flat * np.cos(longitude), flat * np.sin(longitude), np.full_like(longitude, np.sin(latitude))], axis=1
    )


def _maps(stored: Stored, name: str, label: str, views: Any, phase_deg: Any, colours: str, low: float | None,
          high: float | None) -> Figure:  # fmt: skip
    views, phases = many(views), [_number("phase_deg", p) for p in many(phase_deg)]
    for view in views:
        if view not in VIEWS:
            raise FigureError(f"no view {view!r}; there are {', '.join(VIEWS)}")
    if not isinstance(colours, str) or colours not in colormaps:
        raise FigureError(f"no colours {colours!r}; matplotlib has cividis, viridis, inferno, magma, plasma and others")
    if not views or not phases or len(views) * len(phases) > 48:
        raise FigureError(f"{len(views)} views at {len(phases)} phases: from 1 to 48 panels can be drawn")
    body = _Body(stored)
    shown = values(stored, name)
    suns = sun_directions(stored)
    turns = -values(stored, "subsolar_longitude_deg")
    nodes = [int(np.argmin(np.abs((turns - turns[0] - p + 180.0) % 360.0 - 180.0))) for p in phases]

    drawn = shown[:, nodes]
    bottom = float(drawn.min()) if low is None else _number("low", low)
    top = float(drawn.max()) if high is None else _number("high", high)
    if bottom > top or (bottom == top and not (low is None and high is None)):
        raise FigureError(f"the colour bar would run from {bottom:g} to {top:g}; low and high must ascend")
    norm = Normalize(bottom, top) if bottom < top else Normalize(bottom - 0.5, top + 0.5)
    columns = len(views) if len(phases) > 1 or len(views) <= 3 else math.ceil(math.sqrt(len(views)))
    grid = [(view, node, phase) for node, phase in zip(nodes, phases) for view in views]
    looks = [body.look(view, suns[node]) for view, node, _ in grid]
    figure, panels, bar_place = _lay_out([look.bounds for look in looks], columns, body.reach)
    for axes, look, (view, node, phase) in zip(panels, looks, grid):
        body.draw(axes, look, suns[node], shown[:, node], colormaps[colours], norm)
        turned = f", turned {phase:g}$\\degree$" if len(phases) > 1 or phase else ""
        axes.set_title(VIEWS[view] + turned, pad=3, fontsize=8 if _width_in(axes) > 1.5 else 6.5)
    unit = typeset(stored.arrays[name].units)
    bar = figure.colorbar(
        ScalarMappable(norm, colormaps[colours]), cax=bar_place, label=f"{label} ({unit})", extend=_beyond(drawn, norm)
    )
    bar.outline.set_linewidth(0.4)  # type: ignore[operator]
    distance = float(values(stored, "place_sun_distance_au").min())
    title(figure, stored.name, f"at perihelion, {distance:.3g} au from the Sun")
    return figure


def _width_in(axes: Axes) -> float:
    """Width of a panel, inches."""
    figure = axes.get_figure()
    return float(axes.get_position().width * figure.get_size_inches()[0])  # type: ignore[union-attr]


def _lay_out(bounds: list[np.ndarray], columns: int, reach: float) -> tuple[Figure, list[Axes], Axes]:
    """Panels of one common scale, no larger than what they show, and a place for the colour bar.

    bounds : of each panel, left, right, low, high, m
    """
    rows = [bounds[k : k + columns] for k in range(0, len(bounds), columns)]
    widths = [max(row[c][1] - row[c][0] for row in rows if c < len(row)) for c in range(columns)]
    heights = [max(b[3] - b[2] for b in row) for row in rows]
    head, gap, foot, side, top = 0.22, 0.1, 0.34, 0.75, 0.24  # inches
    scale = min(  # inches to the metre
        (PAGE_IN - side - gap * (columns + 1)) / sum(widths), (8.6 - foot - top - head * len(rows)) / sum(heights),
        2.2 / (2 * reach),
    )  # fmt: skip
    high = top + foot + sum(heights) * scale + head * len(rows)
    wide = max(COLUMN_IN, sum(widths) * scale + gap * (columns + 1) + side)
    figure = Figure(figsize=(wide, high))
    start = (wide - side - sum(widths) * scale - gap * (columns - 1)) / 2
    panels = []
    y = high - top
    for row, height in zip(rows, heights):
        y -= head + height * scale
        x = start
        for (left, right, low, up), width in zip(row, widths):
            axes = figure.add_axes((x / wide, y / high, width * scale / wide, height * scale / high))
            axes.set_axis_off()
            centre, middle = (left + right) / 2, (low + up) / 2
            axes.set_xlim(centre - width / 2, centre + width / 2)
            axes.set_ylim(middle - height / 2, middle + height / 2)
            panels.append(axes)
            x += width * scale + gap
    _scale_bar(
        figure.add_axes((0.1 / wide, 0.04 / high, (wide - 0.2) / wide, (foot - 0.06) / high)), (wide - 0.2) / scale
    )
    tall = min(3.2, 0.8 * (high - foot - top))
    middle = (foot + high - top) / 2
    return (
        figure,
        panels,
        figure.add_axes(((wide - side + 0.12) / wide, (middle - tall / 2) / high, 0.1 / wide, tall / high)),
    )


def _scale_bar(axes: Axes, width_m: float) -> None:
    """A bar of a round length; all views have this scale."""
    axes.set_axis_off()
    axes.set(xlim=(0, width_m), ylim=(0, 1))
    wish = 0.2 * width_m
    power = 10.0 ** math.floor(math.log10(wish))
    length = max(k * power for k in (1.0, 2.0, 5.0) if k * power <= wish)
    label = f"{length / 1000:g} km" if length >= 1000 else f"{length:g} m" if length >= 1 else f"{length * 100:g} cm"
    axes.plot([0, length], [0.15, 0.15], color="black", lw=1.6, solid_capstyle="butt")
    axes.text(length / 2, 0.3, label, ha="center", va="bottom", fontsize=7)


def _beyond(drawn: np.ndarray, norm: Normalize) -> Any:
    under, over = bool(drawn.min() < norm.vmin), bool(drawn.max() > norm.vmax)
    return {(0, 0): "neither", (1, 0): "min", (0, 1): "max", (1, 1): "both"}[under, over]


def _number(name: str, value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise FigureError(f"{name}: {value!r} is not a number")
    return float(value)


def _viewer(view: str, sun: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Unit vectors to the viewer and to what is up in the picture; the Sun is above in views from over the poles."""
    flat = np.array([sun[0], sun[1], 0.0])
    length = np.linalg.norm(flat)
    noon = flat / length if length > 1e-6 else np.array([1.0, 0.0, 0.0])
    towards = {
        "front": sun,
        "back": -sun,
        "morning": np.cross(noon, UNIT_Z),  # where the Sun is rising: the body turns eastwards, about +z
        "evening": np.cross(UNIT_Z, noon),
        "north": UNIT_Z,
        "south": -UNIT_Z,
    }[view]
    up = noon if view in ("north", "south") else UNIT_Z
    up = up - (up @ towards) * towards
    if np.linalg.norm(up) < 1e-3:  # looking along the axis after all
        up = noon - (noon @ towards) * towards
    return towards, up / np.linalg.norm(up)


@dataclass(frozen=True)
class _Look:
    """A view from afar: where the viewer is, the picture's axes, what is where in it."""

    towards: np.ndarray
    plane: np.ndarray  # (2, 3)
    bounds: np.ndarray  # left, right, low, high of all that is drawn, m
    limb: float  # how far the body reaches towards the Sun as it is seen, m


class _Body:
    """The facets, ready to be looked at from anywhere."""

    def __init__(self, stored: Stored) -> None:
        self.vertices = values(stored, "vertex_m")
        self.corners = self.vertices[values(stored, "facet_vertex")]
        self.middles = self.corners.mean(axis=1)
        a, b, c = np.moveaxis(self.corners, 1, 0)
        self.normals = np.cross(b - a, c - a)
        self.reach = float(np.linalg.norm(self.vertices, axis=1).max())

    def hits(self, start: np.ndarray, way: np.ndarray) -> np.ndarray:
        """Distances at which a ray meets facets, m (Moeller & Trumbore 1997)."""
        a = self.corners[:, 0] - start
        e1, e2 = self.corners[:, 1] - self.corners[:, 0], self.corners[:, 2] - self.corners[:, 0]
        p = np.cross(way, e2)
        q = np.cross(-a, e1)
        with np.errstate(divide="ignore", invalid="ignore"):
            det = np.einsum("fi,fi->f", e1, p)
            u, v, t = np.einsum("fi,fi->f", -a, p) / det, q @ way / det, np.einsum("fi,fi->f", e2, q) / det
            return np.asarray(t[(u >= -1e-9) & (v >= -1e-9) & (u + v <= 1 + 1e-9) & (t > 0)])

    def surface(self, way: np.ndarray) -> np.ndarray:
        """Point where the ray from the centre of mass leaves the body for good."""
        return np.asarray(way * self.hits(np.zeros(3), way).max(initial=1e-3 * self.reach))

    def in_sight(self, point: np.ndarray, towards: np.ndarray) -> bool:
        """Whether nothing of the body is between a point on it and the viewer."""
        return not len(self.hits(point + 1e-4 * self.reach * (point / np.linalg.norm(point) + towards), towards))

    def look(self, view: str, sun: np.ndarray) -> _Look:
        """The view, and the room that it needs."""
        towards, up = _viewer(view, sun)
        plane = np.stack([np.cross(up, towards), up])
        seen = self.vertices @ plane.T
        way = plane @ sun
        limb = max(float((seen @ way).max()) / max(float(np.linalg.norm(way)), 1e-9), 0.0)
        points = [seen]
        for sign in (1.0, -1.0):
            tip = plane @ (self.surface(sign * UNIT_Z) + sign * UNIT_Z * 0.16 * self.reach)
            points.append(tip + 0.16 * self.reach * np.array([[-1, -1], [1, 1]]))
        if self._sideways(sun @ towards):
            end = way / np.linalg.norm(way) * (limb + 0.3 * self.reach)
            points.append(end + 0.1 * self.reach * np.array([[-1, -1], [1, 1]]))
        every = np.concatenate(points)
        bounds = np.stack([every.min(axis=0), every.max(axis=0)], axis=1).ravel()
        return _Look(towards, plane, bounds, limb)

    @staticmethod
    def _sideways(facing: float) -> bool:
        return abs(facing) < 0.94

    def draw(self, axes: Axes, look: _Look, sun: np.ndarray, shown: np.ndarray, colours: Any, norm: Normalize) -> None:
        """One view: facets turned to the viewer, the far ones first; spin axis and Sun."""
        seen = np.flatnonzero(self.normals @ look.towards > 0)
        seen = seen[np.argsort(self.middles[seen] @ look.towards, kind="stable")]
        paint = colours(norm(shown[seen]))
        axes.add_collection(
            PolyCollection(
                self.corners[seen] @ look.plane.T,
                facecolors=paint,
                edgecolors=paint,  # without it, hairlines of background show between facets
                linewidths=0.3,
                zorder=2,
                rasterized=len(self.middles) > RASTER_FACETS,
            ),
            autolim=False,
        )
        for sign, letter in ((1.0, "N"), (-1.0, "S")):
            self._pole(axes, look, sign * UNIT_Z, letter)
        self._sun(axes, look, sun)

    def _pole(self, axes: Axes, look: _Look, pole: np.ndarray, letter: str) -> None:
        foot = self.surface(pole)
        sight = self.in_sight(foot, look.towards)
        facing = pole @ look.towards
        start, end = look.plane @ foot, look.plane @ (foot + pole * 0.16 * self.reach)
        if abs(facing) > 0.985:
            if sight:
                _ringed(axes, start, "+", 5)
            return
        (line,) = axes.plot(
            *np.stack([start, end]).T, color="black", lw=1.0, zorder=3 if sight else 1, solid_capstyle="butt"
        )
        line.set_path_effects([HALO])
        way = (end - start) / np.linalg.norm(end - start)
        x, y = end + 0.09 * self.reach * way
        text = axes.text(x, y, letter, ha="center", va="center", fontsize=7, zorder=5 if sight else 1)
        text.set_path_effects([HALO])

    def _sun(self, axes: Axes, look: _Look, sun: np.ndarray) -> None:
        below = self.surface(sun)
        facing = sun @ look.towards
        if facing > 0 and self.in_sight(below, look.towards):
            _ringed(axes, look.plane @ below, ".", 4)
        if self._sideways(facing):
            way = look.plane @ sun
            way /= np.linalg.norm(way)
            axes.annotate(
                "", xy=way * (look.limb + 0.05 * self.reach), xytext=way * (look.limb + 0.3 * self.reach), zorder=6,
                arrowprops={"arrowstyle": "-|>", "color": SUN, "lw": 1.0, "mutation_scale": 7, "shrinkA": 0,
                            "shrinkB": 0},
            )  # fmt: skip
            aside = np.array([-way[1], way[0]])
            x, y = way * (look.limb + 0.2 * self.reach) + (0.13 if abs(way[1]) < 0.7 else 0.2) * self.reach * aside
            axes.text(x, y, "Sun", ha="center", va="center", fontsize=6.5, color=SUN, zorder=6)


def _ringed(axes: Axes, at: np.ndarray, mark: str, size: float) -> None:
    """A mark that shows on light and on dark ground."""
    axes.plot(*at, "o", ms=size + 2, mfc="white", mec="black", mew=0.7, zorder=4)
    axes.plot(*at, mark, ms=size, color="black", mew=0.8, zorder=5)
