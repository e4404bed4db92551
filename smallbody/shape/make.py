"""Bodies made from numbers: each maker gives a closed surface of near-uniform facets, the same for the same seed."""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from smallbody.errors import ShapeError
from smallbody.shape.even import Creases, Radius, even_surface
from smallbody.shape.grid import nearest_facet_count, sphere_grid
from smallbody.shape.model import Made, Shape, mass_properties

MOST_FACETS = 5_000_000
FRAME_FACETS = 20_480
RIM = 0.2  # height of a crater's rim over its depth
LONGEST = 20.0  # longest over shortest axis of an ellipsoid whose facets can still be spread evenly


@dataclass(frozen=True)
class Number:
    """A number that a maker takes: what it is, its default, its range, and values in it that it may not have."""

    about: str
    default: float
    low: float
    high: float
    whole: bool = False
    barred: tuple[int, ...] = ()


@dataclass(frozen=True)
class Kind:
    """A kind of body that `make_shape` makes.

    about : one line
    radius : from checked numbers and a random generator to the radius in every direction, in any unit
    numbers : what it takes besides `diameter_km`
    fewest : facets
    principal : turned to its principal axes once made (for bodies without an axis of their own)
    even : facets are spread evenly over the surface, not only in direction
    density : where facets should be finer, from the checked numbers
    creases : where facets should not lie across the surface's edges and furrows, from the checked numbers
    """

    about: str
    radius: Callable[[dict[str, Any], np.random.Generator], Radius]
    numbers: dict[str, Number] = field(default_factory=dict)
    fewest: int = 80
    principal: bool = False
    even: bool = True
    creases: Callable[[dict[str, Any]], Creases] | None = None
    density: Callable[[dict[str, Any]], Radius] | None = None


def make_shape(kind: str, facets: int, seed: int = 0, **numbers: Any) -> Shape:
    """A body of some kind, centre of mass at the origin, by default as large as a sphere of 1 km diameter.

    kind : one of `KINDS`
    facets : how many; the nearest of 20 n^2 and 60 n^2 (20, 60, 80, 180, 240, 320, 500, 540, ...) is made
    seed : for kinds with chance in them; the same seed gives the same body, whatever the number of facets
    numbers : `diameter_km` (of the sphere with the same volume) and the numbers of the kind; an ellipsoid's `axes`,
        semi-axes in km, set its size unless diameter_km does
    raises : ShapeError, for an unknown kind or number, or a number out of its range

    >>> body = make_shape("sphere", 500)
    >>> len(body.facets), round(body.diameter_m, 6)
    (500, 1000.0)
    """
    if kind not in KINDS:
        raise ShapeError(f"no kind of shape is called {kind!r}{_like(kind, KINDS)}; there are {', '.join(KINDS)}")
    what = KINDS[kind]
    facets = _whole("facets", facets, what.fewest, MOST_FACETS)
    seed = _whole("seed", seed, 0, 2**63)
    diameter_km = numbers.get("diameter_km")
    if diameter_km is not None:
        diameter_km = _number("diameter_km", diameter_km, Number("", 1.0, 1e-9, 1e6))
    chosen = _chosen(kind, {k: v for k, v in numbers.items() if k != "diameter_km"})

    radius = what.radius(chosen, np.random.default_rng(seed))
    if what.even:
        creases = what.creases(chosen) if what.creases else None
        density = what.density(chosen) if what.density else None
        vertices, triangles = even_surface(radius, facets, creases, density)
    else:
        grid = sphere_grid(facets)
        vertices, triangles = grid.points * radius(grid.points)[:, None], grid.facets
    if diameter_km is None:
        diameter_km = 2.0 * float(np.cbrt(np.prod(chosen["axes"]))) if "axes" in chosen else 1.0

    shape = Shape(vertices, triangles)
    if what.principal:
        shape = shape.turned(_principal_axes(radius))
    shape = shape.moved(-shape.mass.centre_m)
    shape = shape.scaled(1000.0 * diameter_km / shape.diameter_m)
    kept = {k: v for k, v in numbers.items() if v is not None}
    return Shape(shape.vertices_m, shape.facets, made=Made(kind, nearest_facet_count(facets), seed, kept))


def _principal_axes(radius: Radius) -> np.ndarray:
    """Rows are the principal axes, from a grid that is always the same: how many facets are asked for turns nothing."""
    grid = sphere_grid(FRAME_FACETS)
    return mass_properties(grid.points * radius(grid.points)[:, None], grid.facets).axes


def _chosen(kind: str, given: dict[str, Any]) -> dict[str, Any]:
    known = KINDS[kind].numbers
    names = [*known, *(["axes"] if kind == "ellipsoid" else [])]
    for name in given:
        if name not in names:
            raise ShapeError(
                f"a {kind} takes no {name!r}{_like(name, names)}; it takes {', '.join([*names, 'diameter_km'])}"
            )
    chosen: dict[str, Any] = {n: _number(n, given.get(n, d.default), d) for n, d in known.items()}
    if kind == "ellipsoid":
        axes = given.get("axes", (0.6, 0.5, 0.125 / 0.3))
        if not isinstance(axes, list | tuple | np.ndarray) or len(axes) != 3:
            raise ShapeError(f"an ellipsoid's axes are three semi-axes in km, not {axes!r}")
        chosen["axes"] = [_number("axes", a, Number("", 1.0, 1e-12, 1e9)) for a in axes]
        if max(chosen["axes"]) > LONGEST * min(chosen["axes"]):
            raise ShapeError(f"an ellipsoid's longest axis is at most {LONGEST:g} times its shortest, not {axes!r}")
    return chosen


def _number(name: str, value: Any, wanted: Number) -> float | int:
    if wanted.whole:
        number = _whole(name, value, int(wanted.low), int(wanted.high))
        if number in wanted.barred:
            raise ShapeError(f"{name} is {' or '.join(str(n) for n in (wanted.high, wanted.low))}, not {number}")
        return number
    try:
        real = math.nan if isinstance(value, bool | str | bytes) else float(value)
    except (TypeError, ValueError):
        real = math.nan
    if not wanted.low <= real <= wanted.high:
        raise ShapeError(f"{name} is a number from {wanted.low:g} to {wanted.high:g}, not {value!r}")
    return real


def _whole(name: str, value: Any, low: int, high: int) -> int:
    try:
        number = None if isinstance(value, bool | str | bytes) or int(value) != value else int(value)
    except (TypeError, ValueError, OverflowError):
        number = None
    if number is None or not low <= number <= high:
        raise ShapeError(f"{name} is a whole number from {low:,} to {high:,}, not {value!r}")
    return number


def _like(name: str, known: Any) -> str:
    near = difflib.get_close_matches(name, list(known), n=1)
    return f" (did you mean {near[0]!r}?)" if near else ""


# Kinds, each a radius in every direction


def _sphere(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    return lambda u: np.ones(len(u))


def _ellipsoid(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    axes = np.array(numbers["axes"])
    return lambda u: 1.0 / np.sqrt(((u / axes) ** 2).sum(axis=1))


def _gaussian(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    """Gaussian random sphere: a log-radius with normal statistics and covariance coefficients C_l ~ l^-index, l >= 2.

    source : K. Muinonen 1998, A&A 332, 1087; power law as in Muinonen & Lagerros 1998, A&A 333, 753
    """
    rough = gaussian_log_radius(rng, numbers["sigma"], numbers["index"], int(numbers["degree"]))
    return lambda u: np.exp(rough(u))


def gaussian_log_radius(rng: np.random.Generator, sigma: float, index: float, degree: int) -> Radius:
    """One draw of the log-radius of a Gaussian random sphere.

    sigma : relative standard deviation of the radius; that of its logarithm is sqrt(ln(1 + sigma^2))
    index : C_l falls as l^-index; 2 <= l <= degree
    """
    l = np.arange(2, degree + 1)
    share = l**-index
    variance = math.log1p(sigma**2) * share / share.sum()
    coefficients = np.zeros((degree + 1, degree + 1, 2))
    for k, c in zip(l, variance):  # one coefficient of the 4 pi normalised harmonics has variance C_l / (2 l + 1)
        coefficients[k, : k + 1] = math.sqrt(c / (2 * k + 1)) * rng.standard_normal((k + 1, 2))
    coefficients[:, 0, 1] = 0.0

    def log_radius(u: np.ndarray) -> np.ndarray:
        return harmonics_sum(coefficients, u)

    return log_radius


def harmonics_sum(coefficients: np.ndarray, u: np.ndarray) -> np.ndarray:
    """Sum of real spherical harmonics at unit vectors u (n, 3): (n,).

    coefficients : (degree + 1, degree + 1, 2), those of cos(m lon) and sin(m lon), by l and m; harmonics normalised so
        that their mean square over the sphere is 1
    source : forward columns recursion (Holmes & Featherstone 2002, J. Geodesy 76, 279, eq. 11-13)
    """
    degree = len(coefficients) - 1
    z = np.clip(u[:, 2], -1.0, 1.0)
    s = np.hypot(u[:, 0], u[:, 1])
    with np.errstate(invalid="ignore", divide="ignore"):
        step = np.where(s > 0.0, (u[:, 0] + 1j * u[:, 1]) / np.where(s > 0.0, s, 1.0), 1.0)
    total = np.zeros(len(u))
    turn = np.ones(len(u), dtype=complex)
    sectoral = np.ones(len(u))  # normalised P_mm
    for m in range(degree + 1):
        if m > 0:
            sectoral = sectoral * s * math.sqrt((2 * m + 1) / (2 * m) * (2.0 if m == 1 else 1.0))
            turn = turn * step
        below, here = np.zeros(len(u)), sectoral
        cosine = coefficients[m, m, 0] * here
        sine = coefficients[m, m, 1] * here
        for l in range(m + 1, degree + 1):
            a = math.sqrt((2 * l - 1) * (2 * l + 1) / ((l - m) * (l + m)))
            b = math.sqrt((2 * l + 1) * (l + m - 1) * (l - m - 1) / ((l - m) * (l + m) * (2 * l - 3))) if l > 1 else 0.0
            below, here = here, a * z * here - b * below
            cosine = cosine + coefficients[l, m, 0] * here
            sine = sine + coefficients[l, m, 1] * here
        total += turn.real * cosine + turn.imag * sine
    return total


def _top(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    """rho^2 + |z/c|^p = 1, rho from the axis: blunt at the poles, the sharper at the equator the nearer p is to 1."""
    power, height = 2.0 - numbers["ridge"], numbers["height"]
    rough = gaussian_log_radius(rng, numbers["roughness"], 3.0, 12)

    def radius(u: np.ndarray) -> np.ndarray:
        rho2, up = u[:, 0] ** 2 + u[:, 1] ** 2, np.abs(u[:, 2]) / height
        return _root(lambda r: rho2 * r**2 + (up * r) ** power - 1.0, np.full(len(u), 3.0)) * np.exp(rough(u))

    return radius


def _twolobe(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    """Two ellipsoids that overlap, their union rounded at the neck; distances from a point in the neck, inside both.

    With f1, f2 < 0 inside the lobes the surface is exp(-k f1) + exp(-k f2) = 1. On it both f are >= 0, hence growing
    outwards along any ray from the neck (they are convex and negative there), so a ray meets the surface once.
    """
    small, ring = numbers["ratio"], numbers["neck"] * numbers["ratio"]
    # at the neck f1 = f2 = ln 2 / k: lobes so far apart that the surface passes at the ring, their surfaces within it
    gap = 0.5 * numbers["blend"] * ring**2
    sharp = math.log(2.0) / gap
    flat = np.array([1.0, numbers["flat"], numbers["flat"] ** 2])
    rough = gaussian_log_radius(rng, numbers["roughness"], 3.0, 12)
    lobes = [(1.0, -math.sqrt((1.0 + gap) ** 2 - ring**2)), (small, math.sqrt((small + gap) ** 2 - ring**2))]

    def radius(u: np.ndarray) -> np.ndarray:
        # in the stretched frame of a lobe at x, |r u - centre|^2 = squared r^2 - 2 x u_x r + x^2
        squared = ((u / flat) ** 2).sum(axis=1)

        def outside(r: np.ndarray) -> np.ndarray:
            one, two = (np.sqrt(np.maximum((squared * r - 2.0 * x * u[:, 0]) * r + x**2, 0.0)) - s for s, x in lobes)
            low = np.minimum(one, two)
            return np.asarray(low - np.log1p(np.exp(-sharp * np.abs(one - two))) / sharp)

        return _root(outside, np.full(len(u), 4.0)) * np.exp(rough(u))

    return radius


def _finer_at_the_neck(numbers: dict[str, Any]) -> Radius:
    # even facets would bridge the wedge between the lobes; a third of their side follows it down to the neck
    return lambda u: 1.0 + 8.0 * np.exp(-((u[:, 0] / 0.3) ** 2))


def _cratered(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    """Bowls with raised rims pressed one after the other into a mildly irregular body; sizes follow a power law."""
    rough = gaussian_log_radius(rng, numbers["roughness"], 3.5, 10)
    count, widest, depth = int(numbers["craters"]), math.radians(numbers["widest_deg"]), numbers["depth"]
    z = rng.uniform(-1.0, 1.0, count)
    lon = rng.uniform(0.0, 2.0 * math.pi, count)
    place = np.stack([np.sqrt(1.0 - z**2) * np.cos(lon), np.sqrt(1.0 - z**2) * np.sin(lon), z], axis=1)
    # cumulative number ~ size^-2, largest first, so that small ones lie in large ones
    size = np.sort(widest / 2.0 * (1.0 - rng.uniform(0.0, 1.0 - 0.2**2, count)) ** 0.5)[::-1]
    if count:
        size[0] = widest / 2.0

    levels = np.exp(rough(place))

    def radius(u: np.ndarray) -> np.ndarray:
        before = np.exp(rough(u))
        r = before
        for centre, half, level in zip(place, size, levels):
            x = np.arccos(np.clip(u @ centre, -1.0, 1.0)) / half  # 0 in the middle, 1 at the rim
            fresh = np.clip((1.4 - x) / 0.6, 0.0, 1.0)  # what was there before is wiped out inside, and stays outside
            fresh = fresh * fresh * (3.0 - 2.0 * fresh)
            deep = 2.0 * half * level * depth
            bowl = deep * ((1.0 + RIM) * x**2 - 1.0)
            rim = deep * RIM * np.exp(-(((np.maximum(x, 1.0) - 1.0) / 0.3) ** 2))
            r = (1.0 - fresh) * r + fresh * before + np.where(x < 1.0, bowl, rim)
        return np.maximum(r, 0.2)

    return radius


def _windmill(numbers: dict[str, Any], rng: np.random.Generator) -> Radius:
    """A sphere with blades from pole to pole: each rises gently along longitude and falls off steeply.

    hand = +1: the steep faces look west, against the rotation (about +z). They see more of the Sun over a day than the
    gentle slopes, which lean to the poles; the recoil of their heat pushes them east: the body spins up (no obliquity).
    hand = -1 is the mirror image and spins down. That holds for the numbers it has by default; six low blades were seen
    to turn the other way, slowly, since they shade each other.
    """
    blades, height, steep, hand = int(numbers["blades"]), numbers["height"], numbers["steep"], numbers["hand"]

    def radius(u: np.ndarray) -> np.ndarray:
        lon = np.arctan2(u[:, 1], u[:, 0]) * blades / (2.0 * math.pi) * (-hand)
        phase = lon - np.floor(lon)
        saw = np.where(phase < 1.0 - steep, phase / (1.0 - steep), (1.0 - phase) / steep)
        return 1.0 + height * saw * (u[:, 0] ** 2 + u[:, 1] ** 2)

    return radius


def _equator(numbers: dict[str, Any]) -> Creases:
    def nearest(u: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        s = np.hypot(u[:, 0], u[:, 1])
        level = u * [1.0, 1.0, 0.0] / np.maximum(s, 0.5)[:, None]
        return (s > 0.5).astype(np.int64), np.where(s[:, None] > 0.5, level, u)

    return nearest


def _blade_edges(numbers: dict[str, Any]) -> Creases:
    """The meridians at the foot and at the crest of each blade, but for the caps where they crowd."""
    blades, steep, hand = int(numbers["blades"]), numbers["steep"], numbers["hand"]
    step = 2.0 * math.pi / blades
    edges = -hand * step * np.sort(np.concatenate([np.arange(blades), np.arange(blades) + 1.0 - steep]))

    def nearest(u: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        away = np.arctan2(u[:, 1], u[:, 0])[:, None] - edges
        away = np.abs(away - 2.0 * math.pi * np.round(away / (2.0 * math.pi)))
        which = away.argmin(axis=1)
        s = np.hypot(u[:, 0], u[:, 1])
        there = np.stack([s * np.cos(edges[which]), s * np.sin(edges[which]), u[:, 2]], axis=1)
        clear = s > 0.3
        return np.where(clear, which + 1, 0), np.where(clear[:, None], there, u)

    return nearest


def _root(f: Callable[[np.ndarray], np.ndarray], high: np.ndarray) -> np.ndarray:
    """Where f, negative at 0 and positive at `high`, passes zero, to some thirteen digits.

    source : regula falsi, ends halved ("Illinois", Dowell & Jarratt 1971, BIT 11, 168), each third step a bisection
    """
    low, f_low, f_high = np.zeros_like(high), f(np.zeros_like(high)), f(high)
    side = np.zeros(len(high), dtype=int)
    for k in range(60):
        middle = 0.5 * (low + high) if k % 3 == 2 else low + (high - low) * (f_low / (f_low - f_high))
        f_middle = f(middle)
        inside = f_middle < 0.0
        f_high = np.where(inside, np.where(side == 1, 0.5 * f_high, f_high), f_middle)
        f_low = np.where(inside, f_middle, np.where(side == -1, 0.5 * f_low, f_low))
        low, high = np.where(inside, middle, low), np.where(inside, high, middle)
        side = np.where(inside, 1, -1)
        if (np.minimum(high - low, np.abs(f_middle)) < 1e-13).all():
            return middle
    return 0.5 * (low + high)


_ROUGH = Number("relative standard deviation of the radius by a random roughness", 0.03, 0.0, 0.15)

KINDS: dict[str, Kind] = {
    "sphere": Kind("a sphere", _sphere, fewest=8, even=False),
    "ellipsoid": Kind("a triaxial ellipsoid (axes: three semi-axes, km)", _ellipsoid, fewest=8),
    "gaussian": Kind(
        "a Gaussian random sphere",
        _gaussian,
        {
            "sigma": Number("relative standard deviation of the radius", 0.2, 0.0, 0.4),
            "index": Number("the covariance falls with degree l as l to minus this", 3.5, 2.0, 8.0),
            "degree": Number("highest degree of the harmonics", 10, 2, 30, whole=True),
        },
        principal=True,
    ),
    "top": Kind(
        "a spinning top with an equatorial ridge",
        _top,
        {
            "ridge": Number("sharpness of the ridge, 0 (none) to 0.9", 0.7, 0.0, 0.9),
            "height": Number("pole over equator", 0.9, 0.5, 1.0),
            "roughness": _ROUGH,
        },
        principal=True,
        creases=_equator,
    ),
    "twolobe": Kind(
        "two lobes in contact, with a neck",
        _twolobe,
        {
            "ratio": Number("radius of the smaller lobe over that of the larger", 0.75, 0.5, 1.0),
            "neck": Number("radius of the neck over that of the smaller lobe", 0.45, 0.4, 0.9),
            "flat": Number("y over x axis of a lobe, and z over y", 0.92, 0.7, 1.0),
            "blend": Number("rounding of the neck, from a crease to smooth", 0.5, 0.1, 0.9),
            "roughness": _ROUGH,
        },
        principal=True,
        density=_finer_at_the_neck,
    ),
    "cratered": Kind(
        "an irregular body with bowls pressed into it",
        _cratered,
        {
            "craters": Number("how many", 25, 0, 200, whole=True),
            "widest_deg": Number("diameter of the largest, degrees seen from the middle", 50.0, 5.0, 70.0),
            "depth": Number("depth over diameter", 0.18, 0.0, 0.2),
            "roughness": Number("relative standard deviation of the radius of the body below", 0.08, 0.0, 0.2),
        },
        principal=True,
    ),
    "windmill": Kind(
        "a sphere with blades, which sunlight spins up (hand 1) or down (hand -1)",
        _windmill,
        {
            "blades": Number("how many", 4, 2, 8, whole=True),
            "height": Number("of a blade, in radii of the sphere", 0.3, 0.02, 0.5),
            "steep": Number("part of a blade's width that its steep side takes", 0.15, 0.1, 0.5),
            "hand": Number("1 spins up, -1 down (with few, high blades)", 1, -1, 1, whole=True, barred=(0,)),
        },
        creases=_blade_edges,
    ),
}
