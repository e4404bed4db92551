"""How rates are laid out for people: value, numerical error, unit, cause, and what to make of them. 80 columns."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import click

from smallbody.constants import AU_M, DAY_S, MYR_S

if TYPE_CHECKING:
    from rich.table import Table

    from smallbody.body import Body
    from smallbody.push import Drift, Rate

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
ROUND_OFF = 1e-8  # of the natural scale of a rate: what is left of pushes that cancel


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


def number_in_brackets(value: float, error: float, size: float, nothing: float = 0.0, most_decimals: int = 6) -> str:
    """The same, short, as tables of constants have it: the digits in brackets are the error of the last digits.

    size : sets the exponent, so that what is small beside it looks small
    nothing : what is smaller, error included, is 0

    >>> number_in_brackets(-4.10312e-4, 1.23e-6, size=4e-4), number_in_brackets(1e-22, 0.0, size=4e-4)
    ('-4.103(12)e-4', '0')
    """
    if not math.isfinite(value):
        return "undefined"
    if not math.isfinite(error):
        return f"{value:+.3g}"
    if size == 0.0 or abs(value) + abs(error) <= nothing:
        return "0"
    exponent = _exponent(size)
    scale, suffix = (1.0, "") if exponent == 0 else (10.0**exponent, f"e{exponent}")
    decimals = _decimals(size / scale, error / scale, most_decimals)
    digits = f"{value / scale:+.{decimals}f}"
    last = round(abs(error) / scale * 10**decimals)
    if last == 0 and float(digits) == 0.0:
        return "0"
    bracket = f"{last}" if last < 100 or decimals == 0 else f"{abs(error) / scale:.{decimals}f}"
    return f"{digits}({bracket}){suffix}"


def _exponent(size: float) -> int:
    """Exponent to write a number of this size with; 0 for numbers that read well without."""
    exponent = math.floor(math.log10(size))
    return 0 if -2 <= exponent <= 4 else exponent


def _decimals(size: float, error: float, most: int) -> int:
    """Two digits of the error, but no more than `most` digits after the first of the value."""
    most = max(0, most - math.floor(math.log10(size)))
    if error == 0.0:
        return most
    rounded = float(f"{abs(error):.1e}")  # 9.96 is 10 to two digits, and has one digit more before the point
    return max(0, min(most, 1 - math.floor(math.log10(rounded))))


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
    nothing = _nothing(body, result)
    with console.capture() as capture:
        console.print(Text(result.name, style="bold"))
        for text in _inputs(body, result):
            console.print(Text(text, style="dim"))
        console.print()
        console.print(_totals(result, nothing))
        console.print()
        console.print(_by_source(result, nothing))
        console.print(Text("in brackets: error of the last digits", style="dim"))
        console.print()
        console.print(_beside(result))
        worth = _in_words(advice, result, nothing)
        if worth:
            console.print()
            console.print(Text("Worth doing", style="bold yellow"))
            for text in worth:
                console.print(textwrap.fill(text, WIDTH, initial_indent="  ", subsequent_indent="    "))
    text = "\n".join(row.rstrip() for row in capture.get().split("\n"))
    try:
        text.encode(console.encoding or "ascii")
    except UnicodeEncodeError:
        text = text.replace("±", "+-").encode("ascii", "replace").decode()
    click.echo(text, nl=False)


def _in_words(advice: Sequence[str], result: Drift, nothing: Mapping[str, float]) -> list[str]:
    """Advice with the rates called as in the table, none about a rate that is nothing but round-off."""
    kept = []
    for text in advice:
        key, colon, rest = text.partition(":")
        rate = getattr(result.orbit, key, None) or getattr(result.spin, key, None)
        if rate is None:
            kept.append(text)
        elif not _is_nothing(rate, nothing[key]):
            kept.append(f"{ {**ORBIT, **SPIN}[key][0] }{colon}{rest}")
    return kept


def _inputs(body: Body, result: Drift) -> list[str]:
    facts = result.provenance
    diameter, mass = facts.get("diameter_km", math.nan), facts.get("mass_kg", math.nan)
    surface, spin, orbit = body.surface, body.spin, body.orbit
    return [
        f"{diameter:.4g} km across, {_few(mass)[1:]} kg, {result.checks.facets:,} facets",
        f"albedo {surface.bond_albedo:g}, emissivity {surface.emissivity:g}, "
        f"thermal inertia {surface.thermal_inertia:g} J m-2 K-1 s-1/2",
        f"turns in {spin.period_h:g} h at obliquity {math.degrees(body.obliquity):.4g} deg; "
        f"orbit a {orbit.a_au:g} au, e {orbit.e:g}, i {orbit.i_deg:g} deg",
    ]


def _nothing(body: Body, result: Drift) -> dict[str, float]:
    """By rate, what is round-off: this part of what the push or the torque would do if none of it cancelled."""
    push, spin_scale = result.acceleration, result.checks.spin_scale_rad_per_d2
    a_au, days = body.orbit.a_au, MYR_S / DAY_S
    accel = max(abs(push.a1_au_per_d2), abs(push.a2_au_per_d2), abs(push.a3_au_per_d2)) / a_au**2
    orbit = ROUND_OFF * accel * days / (body.orbit.mean_motion * DAY_S * a_au)  # 1/Myr
    turn = math.degrees(ROUND_OFF * spin_scale * days / (body.spin.rate * DAY_S))  # deg/Myr
    nothing = dict.fromkeys(ORBIT, math.degrees(orbit)) | dict.fromkeys(SPIN, turn)
    nothing |= {"da_dt_au_per_myr": orbit * a_au, "da_dt_m_per_yr": orbit * a_au * AU_M / 1e6, "de_dt_per_myr": orbit}
    return nothing | {"domega_dt_rad_per_d2": ROUND_OFF * spin_scale, "doubling_time_myr": 0.0}


def _table(*columns: tuple[str, Any]) -> Table:
    from rich.table import Table

    table = Table(box=None, padding=(0, 2, 0, 0), pad_edge=False, header_style="bold")
    for heading, justify in columns:
        table.add_column(heading, justify=justify, no_wrap=True)
    return table


def _totals(result: Drift, nothing: Mapping[str, float]) -> Table:
    table = _table(("Mean rate of change", "left"), ("", "left"), ("unit", "left"), ("error", "right"))
    for heading, rates, labels in (("orbit", result.orbit, ORBIT), ("spin", result.spin, SPIN)):
        for key, (what, unit) in labels.items():
            rate = getattr(rates, key)
            part = abs(rate.numerical_error / rate.value) if rate.value else math.inf
            shown, error = number_with_error(rate.value, rate.numerical_error), share(part)
            if key == "doubling_time_myr":
                shown = shown.lstrip("+")
                if _is_nothing(result.spin.domega_dt_rad_per_d2, nothing["domega_dt_rad_per_d2"]):
                    shown, error = "never", ""
            elif _is_nothing(rate, nothing[key]):
                shown, error = "0 within round-off", ""
            table.add_row(f"{heading:5}  {what}", shown, unit, _styled(error, "yellow" if part > TOO_MUCH else ""))
            heading = ""
    return table


def _is_nothing(rate: Rate, nothing: float) -> bool:
    return abs(rate.value) + abs(rate.numerical_error) <= nothing


def _styled(text: str, style: str) -> Any:
    from rich.text import Text

    return Text(text, style=style)


def _by_source(result: Drift, nothing: Mapping[str, float]) -> Table:
    table = _table(("By cause", "left"), *((source, "left") for source in SOURCES), ("unit", "left"))
    for part, labels in (("orbit", ORBIT), ("spin", SPIN)):
        for key, (what, unit) in labels.items():
            if key in ONCE:
                continue
            rates = [getattr(getattr(result.by_source[source], part), key) for source in SOURCES]
            size = max((abs(r.value) for r in rates if math.isfinite(r.value)), default=0.0)
            shown = [number_in_brackets(r.value, r.numerical_error, size, nothing[key]) for r in rates]
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
    if not math.isfinite(value) or value == 0.0:
        return "+0" if value == 0.0 else "undefined"
    digits, _, exponent = f"{value:+.{decimals}e}".partition("e")
    return f"{digits}e{int(exponent)}"


def print_shape(name: str, facts: Mapping[str, Any], overshadowed: float, details: bool = False) -> None:
    """Print what there is to know about a usable shape; with details, its principal axes and hash too."""
    far = max(facts["extents_m"]) >= 10_000.0
    unit, metres = ("km", 1000.0) if far else ("m", 1.0)

    def size(sides: Sequence[float]) -> str:
        return f"{' x '.join(f'{side / metres:.4g}' for side in sides)} {unit}"

    off = math.hypot(*facts["centre_m"])
    centre = ", ".join(f"{x / metres:.4g}" for x in facts["centre_m"])
    tunnels = f", {facts['handles']} tunnels" if facts["handles"] else ""
    edge = {key: f"{value / metres:.3g}" for key, value in facts["edge_m"].items()}
    rows = {
        "usable": "yes: closed, facets outwards",
        "facets": f"{facts['facets']:,} on {facts['vertices']:,} vertices{tunnels}",
        "diameter": f"{facts['diameter_m'] / metres:.4g} {unit}, of the sphere of the same volume",
        "extents": f"{size(facts['extents_m'])} along x, y, z",
        "": f"{size(facts['principal_extents_m'])} along the principal axes",
        "volume, area": f"{_few(facts['volume_m3'], 3)[1:]} m3, {_few(facts['area_m2'], 3)[1:]} m2",
        "centre of mass": "at the origin" if off < 1e-4 * facts["diameter_m"] else f"at {centre} {unit}",
        "moments": f"{', '.join(_few(x, 3)[1:] for x in facts['moments_m5'])} m5 for unit density",
        "moment ratios": f"{_listed(facts['moment_ratios'])} of the lower two to the greatest",
        "spin axis": f"z is {facts['spin_tilt_deg']:.2g} deg from the axis of greatest moment",
        "edges": f"{edge['min']} to {edge['max']} {unit}, median {edge['median']} {unit}, "
        f"smallest angle {facts['smallest_angle_deg']:.2g} deg",
        "overshadowed": f"{share(overshadowed)} of the facets have something above their horizon",
    }
    if details:
        for axis, about in zip(facts["axes"], ("least", "middle", "greatest")):
            rows[f"axis of {about}"] = ", ".join(f"{x:+.6f}" for x in axis)
        rows["sha256"] = facts["sha256"]
    widest = max(map(len, rows))
    click.echo("\n".join([name, *(f"  {label:{widest}}  {fact}" for label, fact in rows.items())]))


def _listed(values: Sequence[float]) -> str:
    return ", ".join(f"{value:.4g}" for value in values)
