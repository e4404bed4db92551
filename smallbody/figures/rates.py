"""Rates over what was swept: curves, families of curves, maps."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.colors import Normalize
from matplotlib.figure import Figure

from smallbody.errors import FigureError
from smallbody.figures import frame
from smallbody.figures.frame import COLUMN_IN, DASHES, MARKS, SOURCE_LOOK, many, new_figure, typeset, values
from smallbody.quantity import Quantity
from smallbody.store import Stored

DEFAULT = ("da_dt_au_per_myr", "domega_dt_rad_per_d2", "dobliquity_dt_deg_per_myr")
SYMBOLS = {
    "da_dt_au_per_myr": r"d$a$/d$t$",
    "da_dt_m_per_yr": r"d$a$/d$t$",
    "de_dt_per_myr": r"d$e$/d$t$",
    "di_dt_deg_per_myr": r"d$i$/d$t$",
    "dnode_dt_deg_per_myr": r"d$\Omega$/d$t$",
    "dperi_dt_deg_per_myr": r"d$\varpi$/d$t$",
    "dmean_anomaly_dt_deg_per_myr": r"d$M$/d$t$",
    "domega_dt_rad_per_d2": r"d$\omega$/d$t$",
    "dobliquity_dt_deg_per_myr": r"d$\epsilon$/d$t$",
    "dazimuth_dt_deg_per_myr": r"d$\alpha$/d$t$",
    "doubling_time_myr": "Doubling time",
}
NAMES = {  # of inputs, as they stand on an axis
    "spin_obliquity_deg": "Obliquity", "spin_pole_azimuth_deg": "Azimuth of the pole",
    "spin_period_h": "Rotation period", "surface_thermal_inertia": "Thermal inertia",
    "surface_bond_albedo": "Bond albedo", "surface_emissivity": "Emissivity", "orbit_a_au": "Semi-major axis",
    "orbit_e": "Eccentricity", "orbit_i_deg": "Inclination", "orbit_node_deg": "Longitude of the node",
    "orbit_peri_deg": "Argument of perihelion", "bulk_density_kg_m3": "Bulk density", "bulk_mass_kg": "Mass",
    "shape_diameter_km": "Diameter", "shape_sphere_facets": "Facets", "shape_facets": "Facets",
    "solver_rotation_nodes": "Rotation nodes", "solver_orbit_places": "Orbit places, heat",
    "solver_light_places": "Orbit places, light", "solver_lit_samples": "Samples a facet",
    "solver_march_steps": "Steps a rotation",
}  # fmt: skip
MOST_LINES = 7  # of one family; more are a map
DECADES = 20.0  # a ratio from which on an axis is logarithmic
ROUND_OFF = 1e-9  # of the natural scale of the spin rates: below it a rate is zero


def rates(stored: Stored, *, rates: Any = DEFAULT, x: str | None = None, as_map: bool | None = None,
          sphere: bool = True, **fixed: Any) -> Figure:  # fmt: skip
    """Rates against what was swept, with their numerical errors.

    rates : which, by their names in the file
    x : the input along the axis; else the one with most values
    as_map : two inputs as a map, or as a family of lines; else as the number of lines allows
    sphere : beside the drift of one family by source, that of the linear theory of a sphere
    fixed : value of every further input, by its name in the file; else its first
    """
    names = many(rates)
    known = [name for name in stored.arrays if f"{name}_error" in stored.arrays]
    for name in names:
        if name not in known:
            raise FigureError(f"no rate {name!r} in this file; it has {', '.join(known)}")
    if not 1 <= len(names) <= 6:
        raise FigureError(f"{len(names)} rates: from 1 to 6 can be drawn")
    axes_names = list(stored.arrays[names[0]].dims)
    for name in fixed:
        if name not in axes_names:
            raise FigureError(f"rates has no choice {name!r}; it has rates, x, as_map, sphere, {', '.join(axes_names)}")
    if x is not None and (x not in axes_names or x in fixed):
        raise FigureError(
            f"x: no {x!r} to draw against; there are {', '.join(n for n in axes_names if n not in fixed)}"
        )
    free = [n for n in axes_names if n not in fixed]
    if not free:
        raise FigureError("every input is given a value, none is left to draw against")
    free.sort(key=lambda n: (n != x, -len(values(stored, n))))
    free, rest = free[:2], free[2:]
    chosen = {n: _index(stored, n, fixed[n]) for n in fixed} | dict.fromkeys(rest, 0)
    if len(free) == 2 and len(values(stored, free[1])) == 1:
        chosen[free.pop()] = 0
    cut = _Cut(stored, free, chosen)
    if len(free) == 1:
        figure = _by_source(cut, names, sphere)
    elif as_map or (as_map is None and len(values(stored, free[1])) > MOST_LINES):
        figure = _map(cut, names)
    else:
        if len(values(stored, free[1])) > len(DASHES):
            raise FigureError(f"{len(values(stored, free[1]))} lines cannot be told apart; as_map draws a map")
        figure = _family(cut, names)
    said = [_said(stored, n, values(stored, n)[i]) for n, i in chosen.items()]
    lost = cut.faults()
    said.append(f"{lost} cell{'s' if lost > 1 else ''} missing" if lost else "")
    frame.title(figure, stored.name, *said)
    return figure


class _Cut:
    """The grid with some inputs held at one value; the axes in the order of `free`."""

    def __init__(self, stored: Stored, free: list[str], chosen: dict[str, int]) -> None:
        self.stored, self.free, self.chosen = stored, free, chosen
        self.inputs = [values(stored, n).astype(float) for n in free]
        # ascending, so that lines do not run back
        self.orders = [np.argsort(v, kind="stable") for v in self.inputs]
        self.inputs = [v[o] for v, o in zip(self.inputs, self.orders)]

    def _take(self, quantity: Quantity) -> np.ndarray:
        index = tuple(self.chosen.get(d, slice(None)) for d in quantity.dims)
        left = [d for d in quantity.dims if d not in self.chosen]
        cut = np.transpose(np.asarray(quantity.values)[index], [left.index(n) for n in self.free])
        return np.asarray(cut[np.ix_(*self.orders)])

    def __call__(self, name: str) -> np.ndarray:
        cut = self._take(self.stored.arrays[name]).astype(float)
        if name.startswith("domega_dt") and "spin_scale_rad_per_d2" in self.stored.arrays:
            scale = self._take(self.stored.arrays["spin_scale_rad_per_d2"]).astype(float)
            cut = np.where(np.abs(cut) < ROUND_OFF * scale, 0.0, cut)
        return np.where(np.isinf(cut), np.nan, cut)

    def faults(self) -> int:
        """How many cells failed or are yet to come."""
        if "error" not in self.stored.arrays:
            return 0
        return sum(map(bool, self._take(self.stored.arrays["error"]).ravel()))


def _name(name: str) -> str:
    return NAMES.get(name, name.replace("_", " "))


def _unit(stored: Stored, name: str) -> str:
    unit = stored.arrays[name].units
    return "" if unit == "1" else unit


def _said(stored: Stored, name: str, value: float) -> str:
    """One input at one value, in plain text: units with powers are left out."""
    unit = _unit(stored, name)
    plain = unit if not any(c.isdigit() for c in unit) else ""
    return f"{_name(name)[0].lower()}{_name(name)[1:]} {value:g} {plain}".strip()


def _label(stored: Stored, name: str) -> str:
    unit = typeset(_unit(stored, name))
    return f"{_name(name)} ({unit})" if unit else _name(name)


def _index(stored: Stored, name: str, value: Any) -> int:
    there = values(stored, name)
    if isinstance(value, int | float) and not isinstance(value, bool):
        at = int(np.argmin(np.abs(there - value)))
        if np.isclose(there[at], value, rtol=1e-9, atol=1e-12):
            return at
    raise FigureError(f"{name}: no {value!r} in this file; there are {', '.join(f'{v:g}' for v in there)}")


def _scale(axes: Axes, which: str, at: np.ndarray, unit: str) -> None:
    """Linear, or logarithmic where the values span decades; a zero among those is kept on the axis."""
    positive = at[at > 0]
    spans = len(positive) > 2 and positive.max() / positive.min() >= DECADES and unit != "deg"
    if spans and at.min() > 0:
        getattr(axes, f"set_{which}scale")("log")
    elif spans and at.min() == 0:
        getattr(axes, f"set_{which}scale")("symlog", linthresh=positive.min())
    elif unit == "deg" and len(at) > 1:
        frame.degrees_axis(axes, which, at.min(), at.max())


def _panels(count: int, height_in: float) -> tuple[Figure, list[Axes]]:
    figure = new_figure(COLUMN_IN, height_in * count + 0.95)
    return figure, list(figure.subplots(count, 1, sharex=True, squeeze=False)[:, 0])


def _finish(cut: _Cut, figure: Figure, panels: list[Axes]) -> None:
    _scale(panels[-1], "x", cut.inputs[0], _unit(cut.stored, cut.free[0]))
    panels[-1].set_xlabel(_label(cut.stored, cut.free[0]))
    frame.panel_letters(panels)
    figure.align_ylabels(panels)


def _rate_label(stored: Stored, name: str, power: str) -> str:
    return f"{SYMBOLS.get(name, name)} ({power}{typeset(stored.arrays[name].units)})"


def _by_source(cut: _Cut, names: list[str], sphere: bool) -> Figure:
    figure, panels = _panels(len(names), 1.75)
    at = cut.inputs[0]
    for axes, name in zip(panels, names):
        parts = {
            s: cut(f"{name}_{s}") for s in ("thermal", "scattered", "direct") if f"{name}_{s}" in cut.stored.arrays
        }
        if name == "doubling_time_myr":
            parts = {}
        total, error = cut(name), cut(f"{name}_error")
        theory = f"sphere_{name}"
        if sphere and theory in cut.stored.arrays:
            parts["sphere, linear theory"] = cut(theory)
        factor, power = frame.power_of_ten(total, *parts.values())
        for source, part in parts.items():
            look = SOURCE_LOOK.get(source, {"color": "0.6", "linestyle": (0, (1, 1.5)), "marker": ""})
            axes.plot(at, part * factor, **look, lw=0.9, ms=2.5, mfc="white", label=source, zorder=2)
        axes.errorbar(
            at, total * factor, np.abs(error) * factor, **SOURCE_LOOK["total"], ms=2.8, capsize=2, elinewidth=0.8,
            label="total", zorder=3,
        )  # fmt: skip
        axes.axhline(0.0, color="0.75", lw=0.6, zorder=0)
        axes.margins(y=0.14)
        axes.set_ylabel(_rate_label(cut.stored, name, power))
        if not np.nan_to_num(total).any() and not any(np.nan_to_num(p).any() for p in parts.values()):
            axes.set_ylim(-1, 1)
    _finish(cut, figure, panels)
    found = {label: handle for axes in panels for handle, label in zip(*axes.get_legend_handles_labels())}
    ordered = sorted(found, key=lambda label: (label != "total", label.startswith("sphere")))
    figure.legend([found[k] for k in ordered], ordered, loc="outside lower center", ncols=3)
    return figure


def _family(cut: _Cut, names: list[str]) -> Figure:
    figure, panels = _panels(len(names), 1.75)
    at, of = cut.inputs
    shades = colormaps["viridis"](np.linspace(0.0, 0.82, len(of)))
    for axes, name in zip(panels, names):
        total, error = cut(name), cut(f"{name}_error")
        factor, power = frame.power_of_ten(total)
        for j, value in enumerate(of):
            axes.errorbar(
                at, total[:, j] * factor, np.abs(error[:, j]) * factor, color=shades[j], linestyle=DASHES[j],
                marker=MARKS[j], ms=2.8, lw=1.0, capsize=2, elinewidth=0.8, label=f"{value:g}",
            )  # fmt: skip
        axes.axhline(0.0, color="0.75", lw=0.6, zorder=0)
        axes.margins(y=0.14)
        axes.set_ylabel(_rate_label(cut.stored, name, power))
        if not np.nan_to_num(total).any():
            axes.set_ylim(-1, 1)
    _finish(cut, figure, panels)
    figure.legend(
        *panels[0].get_legend_handles_labels(), loc="outside lower center", ncols=min(4, len(of)),
        title=_label(cut.stored, cut.free[1]), title_fontsize=7,
    )  # fmt: skip
    return figure


def _map(cut: _Cut, names: list[str]) -> Figure:
    figure, panels = _panels(len(names), 2.0)
    at, of = cut.inputs
    for axes, name in zip(panels, names):
        total = np.ma.masked_invalid(cut(name).T)
        factor, power = frame.power_of_ten(total.filled(np.nan))
        total = total * factor
        low, high = (float(total.min()), float(total.max())) if total.count() else (-1.0, 1.0)
        if low < 0 < high:
            most = max(-low, high)
            colours, norm = "RdBu_r", Normalize(-most, most)
        else:
            colours, norm = "viridis", Normalize(low, high) if low < high else Normalize(low - 1, high + 1)
        _scale(axes, "y", of, _unit(cut.stored, cut.free[1]))
        mesh = axes.pcolormesh(
            _edges(at, cut, 0), _edges(of, cut, 1), total, cmap=colours, norm=norm, rasterized=total.size > 4000
        )
        axes.set_facecolor("0.85")  # where a cell is missing
        if low < 0 < high and min(total.shape) > 1:
            axes.contour(at, of, total, levels=[0.0], colors="black", linewidths=0.8)
        figure.colorbar(mesh, ax=axes, label=_rate_label(cut.stored, name, power), pad=0.02).outline.set_linewidth(0.4)  # type: ignore[operator]
        axes.set_ylabel(_label(cut.stored, cut.free[1]))
    _finish(cut, figure, panels)
    return figure


def _edges(at: np.ndarray, cut: _Cut, which: int) -> np.ndarray:
    """Borders half-way between the values, in the measure of the axis."""
    logarithmic = at.min() > 0 and at.max() / at.min() >= DECADES and _unit(cut.stored, cut.free[which]) != "deg"
    v = np.log(at) if logarithmic and len(at) > 2 else at
    if len(v) == 1:
        edges = np.array([v[0] - 0.5, v[0] + 0.5])
    else:
        middle = (v[1:] + v[:-1]) / 2
        edges = np.concatenate([[v[0] - (middle[0] - v[0])], middle, [v[-1] + (v[-1] - middle[-1])]])
    return np.exp(edges) if logarithmic and len(at) > 2 else edges
