"""How rates are laid out for people: value, numerical error, unit, cause, and what to make of them. 80 columns."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rich.table import Table

    from smallbody.body import Body
    from smallbody.push import Drift

WIDTH = 80
ORBIT = {  # key of the result: what it is the rate of, unit
    "da_dt_au_per_myr": ("semi-major axis", "au/Myr"),
    "da_dt_m_per_yr": ("", "m/yr"),
    "de_dt_per_myr": ("eccentricity", "1/Myr"),
    "di_dt_deg_per_myr": ("inclination", "deg/Myr"),
    "dnode_dt_deg_per_myr": ("node", "deg/Myr"),
    "dperi_dt_deg_per_myr": ("perihelion", "deg/Myr"),
    "dmean_anomaly_dt_deg_per_myr": ("mean anomaly", "deg/Myr"),
}
SPIN = {
    "domega_dt_rad_per_d2": ("rotation", "rad/d2"),
    "dobliquity_dt_deg_per_myr": ("obliquity", "deg/Myr"),
    "dazimuth_dt_deg_per_myr": ("pole azimuth", "deg/Myr"),
    "doubling_time_myr": ("doubling time", "Myr"),
}
SOURCES = ("thermal", "scattered", "direct")
ONCE = {"da_dt_m_per_yr", "doubling_time_myr"}  # the same thing in another unit: said once, not by source
TOO_MUCH = 0.02
ROUND_OFF = 1e-9  # of the natural scale of spin rates: what a symmetric body keeps of a torque that cancels


def number_with_error(value: float, error: float, most_decimals: int = 6) -> str:
    """A value and its error with a common exponent and only the digits that the error leaves standing.

    >>> number_with_error(-4.10312e-4, 1.23e-6)
    '-4.103e-4 ± 0.012e-4'
    """
    if not math.isfinite(value):
        return "undefined"
    if not math.isfinite(error):
        return f"{value:+.3g}"
    size = max(abs(value), abs(error))
    if size == 0.0:
        return "0 ± 0"
    exponent = _exponent(size)
    scale, suffix = (1.0, "") if exponent == 0 else (10.0**exponent, f"e{exponent}")
    decimals = _decimals(size / scale, error / scale, most_decimals)
    return f"{value / scale:+.{decimals}f}{suffix} ± {abs(error) / scale:.{decimals}f}{suffix}"


def number_in_brackets(value: float, error: float, size: float, most_decimals: int = 6) -> str:
    """The same, short, as tables of constants have it: the digits in brackets are the error of the last digits.

    size : sets the exponent, so that what is small beside it looks small

    >>> number_in_brackets(-4.10312e-4, 1.23e-6, size=4e-4), number_in_brackets(1e-22, 1e-23, size=4e-4)
    ('-4.103(12)e-4', '0')
    """
    if not math.isfinite(value):
        return "undefined"
    if not math.isfinite(error) or size == 0.0 or abs(value) + abs(error) < 1e-9 * size:
        return "0" if abs(value) <= 1e-9 * size else f"{value:+.3g}"
    exponent = _exponent(size)
    scale, suffix = (1.0, "") if exponent == 0 else (10.0**exponent, f"e{exponent}")
    decimals = _decimals(size / scale, error / scale, most_decimals)
    last = round(abs(error) / scale * 10**decimals)
    bracket = f"{last}" if last < 100 or decimals == 0 else f"{abs(error) / scale:.{decimals}f}"
    return f"{value / scale:+.{decimals}f}({bracket}){suffix}"


def _exponent(size: float) -> int:
    """Exponent to write a number of this size with; 0 for numbers that read well without."""
    exponent = math.floor(math.log10(size))
    return 0 if -2 <= exponent <= 4 else exponent


def _decimals(size: float, error: float, most: int) -> int:
    """Two digits of the error, but no more than `most` digits after the first of the value."""
    most = max(0, most - math.floor(math.log10(size)))
    return most if error == 0.0 else max(0, min(most, 1 - math.floor(math.log10(abs(error)))))


def share(part: float) -> str:
    """A share in per cent, short.

    >>> share(0.00312), share(0.6), share(1.2e-4), share(12.0), share(float("inf"))
    ('0.3 %', '60 %', '0.01 %', '> 999 %', '')
    """
    if not math.isfinite(part):
        return ""
    percent = 100.0 * part
    if percent > 999:
        return "> 999 %"
    if percent >= 0.095 or percent == 0.0:
        return f"{percent:.0f} %" if percent >= 9.95 or percent == 0.0 else f"{percent:.1f} %"
    return f"{percent:.1g} %" if percent >= 0.00095 else "< 0.001 %"


def print_drift(body: Body, result: Drift, advice: Sequence[str] = ()) -> None:
    """Print the rates of one body on stdout: coloured on a terminal, plain text elsewhere."""
    from rich.console import Console
    from rich.text import Text

    console = Console(highlight=False, emoji=False, markup=False)
    console.width = max(WIDTH, console.width)  # a number cut short would be another number
    with console.capture() as capture:
        console.print(Text(result.name, style="bold"))
        for text in _inputs(body, result):
            console.print(Text(text, style="dim"))
        console.print()
        console.print(_totals(result))
        console.print()
        console.print(_by_source(result))
        console.print(Text("in brackets: error of the last digits", style="dim"))
        console.print()
        console.print(_beside(result))
        if advice:
            console.print()
            console.print(Text("Worth doing", style="bold yellow"))
            for text in advice:
                console.print(textwrap.fill(text, WIDTH, initial_indent="  ", subsequent_indent="    "))
    text = "\n".join(row.rstrip() for row in capture.get().split("\n"))
    try:
        text.encode(console.encoding or "ascii")
    except UnicodeEncodeError:
        text = text.replace("±", "+-").encode("ascii", "replace").decode()
    print(text, end="")


def _inputs(body: Body, result: Drift) -> list[str]:
    facts = result.provenance
    diameter, mass = facts.get("diameter_km", math.nan), facts.get("mass_kg", math.nan)
    surface, spin, orbit = body.surface, body.spin, body.orbit
    return [
        f"{diameter:.4g} km across, {mass:.3g} kg, {result.checks.facets:,} facets; "
        f"albedo {surface.bond_albedo:g}, emissivity {surface.emissivity:g}, Gamma {surface.thermal_inertia:g}",
        f"turns in {spin.period_h:g} h, obliquity {math.degrees(body.obliquity):.4g} deg; "
        f"orbit a {orbit.a_au:g} au, e {orbit.e:g}, i {orbit.i_deg:g} deg",
    ]


def _table(*columns: tuple[str, Any]) -> Table:
    from rich.table import Table

    table = Table(box=None, padding=(0, 2, 0, 0), pad_edge=False, header_style="bold")
    for heading, justify in columns:
        table.add_column(heading, justify=justify, no_wrap=True)
    return table


def _totals(result: Drift) -> Table:
    table = _table(("Mean rate of change", "left"), ("", "left"), ("unit", "left"), ("error", "right"))
    for heading, rates, labels in (("orbit", result.orbit, ORBIT), ("spin", result.spin, SPIN)):
        for key, (what, unit) in labels.items():
            rate = getattr(rates, key)
            if key in ("domega_dt_rad_per_d2", "doubling_time_myr") and _no_spin_up(result):
                shown, error = ("never", "") if key == "doubling_time_myr" else ("0 within round-off", "")
            else:
                shown = number_with_error(rate.value, rate.numerical_error)
                error = share(abs(rate.numerical_error / rate.value) if rate.value else math.inf)
            many = rate.value != 0 and abs(rate.numerical_error) > TOO_MUCH * abs(rate.value)
            table.add_row(f"{heading:5}  {what}", shown, unit, _styled(error, "yellow" if many else ""))
            heading = ""
    return table


def _no_spin_up(result: Drift) -> bool:
    rate, scale = result.spin.domega_dt_rad_per_d2, result.checks.spin_scale_rad_per_d2
    return abs(rate.value) + abs(rate.numerical_error) < ROUND_OFF * scale


def _styled(text: str, style: str) -> Any:
    from rich.text import Text

    return Text(text, style=style)


def _by_source(result: Drift) -> Table:
    table = _table(("By cause", "left"), *((source, "left") for source in SOURCES), ("unit", "left"))
    for part, labels in (("orbit", ORBIT), ("spin", SPIN)):
        for key, (what, unit) in labels.items():
            if key in ONCE:
                continue
            rates = [getattr(getattr(result.by_source[source], part), key) for source in SOURCES]
            size = max((abs(r.value) for r in rates if math.isfinite(r.value)), default=0.0)
            if key == "domega_dt_rad_per_d2" and size < ROUND_OFF * result.checks.spin_scale_rad_per_d2:
                size = math.inf
            shown = [number_in_brackets(rate.value, rate.numerical_error, size) for rate in rates]
            table.add_row(what, *shown, unit)
    return table


def _beside(result: Drift) -> Table:
    """What the rates are to be held against."""
    from rich.table import Table

    table = Table(box=None, padding=(0, 2, 0, 0), pad_edge=False, show_header=False)
    table.add_column(no_wrap=True)
    table.add_column()
    sphere, checks, push = result.sphere, result.checks, result.acceleration
    table.add_row("Sphere, linear theory", f"da/dt {_few(sphere.da_dt_au_per_myr)} au/Myr")
    parts = f"diurnal {_few(sphere.diurnal_au_per_myr)}, seasonal {_few(sphere.seasonal_au_per_myr)}"
    table.add_row("", parts)
    for direction, key in (("radial", "a1"), ("transverse", "a2"), ("normal", "a3")):
        key += "_au_per_d2"
        shown = number_with_error(getattr(push, key), push.numerical_error.get(key, math.nan))
        table.add_row(f"{key[:2].upper()}, {direction}", f"{shown} au/d2")
    table.add_row("Area to mass, beta", f"{_few(push.area_to_mass_m2_per_kg)[1:]} m2/kg, {_few(push.beta)}")
    balance = checks.energy_balance
    table.add_row("Energy out over in", f"1 {'-' if balance < 0 else '+'} {_few(abs(balance), 1)[1:]}")
    table.add_row("Overshadowed", f"{share(checks.overshadowed_fraction)} of {checks.facets:,} facets")
    rotations = checks.rotations_per_orbit
    table.add_row("Rotations in an orbit", f"{rotations:,.4g}" if rotations < 100 else f"{rotations:,.0f}")
    return table


def _few(value: float, decimals: int = 2) -> str:
    if not math.isfinite(value):
        return "undefined"
    digits, _, exponent = f"{value:+.{decimals}e}".partition("e")
    return f"{digits}e{int(exponent)}"


UNITS = {"_m5": "m5", "_m3": "m3", "_m2": "m2", "_km3": "km3", "_km2": "km2", "_km": "km", "_deg": "deg", "_m": "m"}


def print_facts(name: str, facts: Mapping[str, Any]) -> None:
    """Print what is known of a shape, a line for each fact; the unit is what the fact's name ends in."""
    rows = [(_label(key), _fact(key, value)) for key, value in facts.items()]
    widest = max(len(label) for label, _ in rows)
    lines = [name, *(f"  {label:{widest}}  {fact}" for label, fact in rows)]
    print("\n".join(line.rstrip() for line in lines))


def _unit(key: str) -> str:
    return next((ending for ending in UNITS if key.endswith(ending)), "")


def _label(key: str) -> str:
    return key.removesuffix(_unit(key)).removesuffix("_fraction").replace("_", " ")


def _fact(key: str, value: Any) -> str:
    unit = UNITS.get(_unit(key), "")
    if key.endswith("_fraction"):
        return share(float(value))
    if isinstance(value, Mapping):
        return ", ".join(f"{_label(k)} {_fact(k, v)}" for k, v in value.items())
    if isinstance(value, str):
        return value
    if hasattr(value, "tolist"):
        value = value.tolist()
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return f"{value:,} {unit}".strip()
    if isinstance(value, (list, tuple)):
        join = " x " if "extent" in key else ", "
        return f"{join.join(_fact('', one) for one in value)} {unit}".strip()
    return f"{value:.6g} {unit}".strip() if isinstance(value, float) else str(value)
