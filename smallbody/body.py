"""The frozen description of one body: shape, bulk, surface, spin, orbit and how to solve for them.

Read from TOML with `read_body` or built in Python; checked the same way in both. Words and degrees at the door,
radians and SI inside. Whatever is wrong is a `BodyError` of one line that names file, line, key, value and what is
allowed; several faults are all named, and stand one by one in `error.details["lines"]`.
"""

from __future__ import annotations

import difflib
import functools
import json
import math
import os
import re
import tomllib
import types
import typing
import warnings
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import asdict, fields
from numbers import Integral, Real
from pathlib import Path
from typing import Annotated, Any, Literal, TypeVar, dataclass_transform

from annotated_types import Ge, Gt, Le, Lt, MultipleOf
from pydantic import BeforeValidator, ConfigDict, Field, ValidationError, model_validator
from pydantic.dataclasses import dataclass
from pydantic_core import PydanticCustomError

from smallbody.constants import AU_M, GM_SUN, HOUR_S
from smallbody.errors import BodyError, Note

__all__ = ["Body", "Bulk", "Orbit", "ShapeSource", "Solver", "Spin", "Surface", "read_body"]

E_LIMIT = 0.98  # above it equal steps of mean anomaly no longer resolve perihelion
LARGEST_FILE = 262_144  # bytes; a body file of this project has some fifty lines
MOST_FAULTS = 20  # named one by one; a file of another kind has thousands
_T = TypeVar("_T")


# --- what a value may be -----------------------------------------------------------------------------------------
def _number(value: Any) -> float:
    """A real number, NumPy's included; a boolean or a text is none."""
    if isinstance(value, bool) or not isinstance(value, Real):
        raise ValueError("not a number")
    try:
        return float(value)
    except OverflowError:
        raise ValueError("too large for a number") from None


def _whole(value: Any) -> int:
    """A whole number; 64.0 is one, because a sweep hands over floats."""
    if isinstance(value, Integral) and not isinstance(value, bool):
        return int(value)
    number = _number(value)
    if not number.is_integer():
        raise ValueError("not a whole number")
    return int(number)


def _flag(value: Any) -> bool:
    if isinstance(value, bool):
        return value
    raise ValueError("neither true nor false")


def _text(value: Any) -> str:
    """Text of one line: it ends up in tables, file attributes and messages."""
    if not isinstance(value, str) or not value.strip() or _unwritable(value):
        raise ValueError("no text")
    if any(ord(c) < 32 or ord(c) == 127 for c in value) or len(value) > 200:
        raise ValueError("not one line of text")
    return value


def _unwritable(text: str) -> bool:
    return any(0xD800 <= ord(c) <= 0xDFFF or c in "\x85\u2028\u2029" for c in text)


def _path(value: Any) -> Path:
    """An absolute path, from the working folder (`read_body` has put the folder of the body file before it)."""
    if not isinstance(value, (str, os.PathLike)):
        raise ValueError("not a path")
    text = os.fspath(value)
    if (
        not isinstance(text, str)
        or not text.strip()
        or any(ord(c) < 32 or ord(c) == 127 for c in text)
        or _unwritable(text)
    ):
        raise ValueError("not a path")
    try:
        return Path(text).resolve()
    except (OSError, RuntimeError, ValueError):
        raise ValueError("not a path") from None


Number = Annotated[float, BeforeValidator(_number)]
Whole = Annotated[int, BeforeValidator(_whole)]
Flag = Annotated[bool, BeforeValidator(_flag)]
Text = Annotated[str, BeforeValidator(_text)]
Angle = Annotated[Number, Field(ge=-360.0, le=360.0)]


def _peel(annotation: Any, metadata: Iterable[Any] = ()) -> tuple[Any, list[Any], str]:
    """The type itself, the constraints on it and its unit, freed from Annotated and from `| None`."""
    constraints, unit = list(metadata), ""
    while True:
        origin = typing.get_origin(annotation)
        if origin is Annotated:
            annotation, *more = typing.get_args(annotation)
            for one in more:
                constraints += getattr(one, "metadata", [one])
                unit = getattr(one, "description", None) or unit
        elif origin in (typing.Union, types.UnionType):
            annotation = next(kind for kind in typing.get_args(annotation) if kind is not type(None))
        else:
            return annotation, constraints, unit


def _range(constraints: list[Any]) -> str:
    words = ""
    for c in constraints:
        if isinstance(c, Ge):
            words = f"from {_figure(c.ge)}"
        elif isinstance(c, Gt):
            words = f"above {_figure(c.gt)}"
        elif isinstance(c, Le):
            words += f" to {_figure(c.le)}" if words.startswith("from") else f" and at most {_figure(c.le)}"
        elif isinstance(c, Lt):
            words += f" to below {_figure(c.lt)}"
    return words


def _figure(value: Any) -> str:
    return str(int(value)) if value == int(value) and abs(value) < 1e7 else f"{value:g}"


def _allowed(annotation: Any, metadata: Iterable[Any] = (), unit: str | None = "") -> str:
    """What a key accepts, in words made from the very constraints that are enforced."""
    kind, constraints, inner_unit = _peel(annotation, metadata)
    unit = f" ({unit or inner_unit})" if unit or inner_unit else ""
    limits = _range(constraints)
    even = any(isinstance(c, MultipleOf) and c.multiple_of == 2 for c in constraints)
    if typing.get_origin(kind) is Literal:
        choices = [_shown(c) for c in typing.get_args(kind)]
        return f"{', '.join(choices[:-1])} or {choices[-1]}"
    if typing.get_origin(kind) is tuple:
        each = [_allowed(part) for part in typing.get_args(kind)]
        listed = f", each {each[0]}" if len(set(each)) == 1 else f": {', '.join(each)}"
        return f"a list of {len(each)}{listed}{unit}"
    if kind is bool:
        return "true or false"
    if kind is Path:
        return "a path as text"
    if kind is str:
        return "text of one line, 1 to 200 characters"
    return f"{'an even whole' if even else 'a whole' if kind is int else 'a'} number {limits}{unit}".strip()


def _shown(value: Any) -> str:
    """A value as the body file would have it, short enough for a message whatever it is."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, Integral) and abs(int(value)) >= 10**30:
        return "a whole number of more than 30 digits"
    if isinstance(value, (list, tuple)):
        shown = ", ".join(_shown(one) for one in value[:6])
        return f"[{shown}{', ...' if len(value) > 6 else ''}]"[:100]
    if isinstance(value, Path):
        value = str(value)
    if isinstance(value, Real):
        return str(value)
    if not isinstance(value, str):
        return ascii(str(value))[1:-1][:60]
    text = value if len(value) <= 60 else value[:57] + "..."
    return json.dumps(text, ensure_ascii=any(not c.isprintable() for c in text))


# --- the sections -----------------------------------------------------------------------------------------------
_Clash = tuple[str, str]  # key at fault ("" for the section itself), and what is wrong
_CONFIG = ConfigDict(extra="forbid", allow_inf_nan=False)


@dataclass_transform(frozen_default=True, kw_only_default=True, field_specifiers=(Field,))
def _described(cls: type[_T]) -> type[_T]:
    """A frozen pydantic dataclass whose constructor raises our one-line BodyError instead of pydantic's many."""
    made = dataclass(frozen=True, kw_only=True, config=_CONFIG)(cls)
    check = made.__init__

    @functools.wraps(check)
    def __init__(self: Any, *positional: Any, **values: Any) -> None:
        section = "" if cls.__name__ == "Body" else _SECTION_OF[cls.__name__]
        if positional:
            raise BodyError(
                f"{cls.__name__} takes named values only, as in {cls.__name__}({next(iter(_keys(made)))}=...)"
            )
        try:
            check(self, **values)
        except ValidationError as error:
            given = {section: values} if section else values
            raise _as_error(_faults(error, given, section)) from None

    made.__init__ = __init__  # type: ignore[method-assign]
    return typing.cast("type[_T]", made)


def _one_of(given: set[str], *choices: str, what: str) -> Iterator[_Clash]:
    found = [key for key in choices if key in given]
    listed = f"{', '.join(choices[:-1])} or {choices[-1]}"
    if not found:
        yield "", f"{what} is missing: give one of {listed}"
    elif len(found) > 1:
        yield found[1], f"{what} is given twice, by {' and by '.join(found)}: give only one of {listed}"


def _agree(section: Any) -> None:
    """Raise what the keys of a section say against each other."""
    given = {f.name for f in fields(section) if getattr(section, f.name) is not None}
    clashes = list(section.clashes(given))
    if clashes:
        raise PydanticCustomError("clash", "keys do not go together", {"clashes": clashes})


@_described
class ShapeSource:
    """Where the shape comes from: a facet file, a sphere, or an ellipsoid; exactly one of the three.

    file : path of a facet file, absolute once read
    sphere_facets : facets of a sphere; its size is diameter_km
    ellipsoid_axes : three semi-axes a, b, c along x, y, z, in length_unit, with `facets` facets
    length_unit : "km" or "m", of the numbers in the file and of the semi-axes
    diameter_km : rescale to this volume-equivalent diameter, km
    spin_axis : "file", the +z of the file through the centre of mass, or "principal", the axis of greatest moment
    raises : BodyError
    """

    file: Annotated[Path, BeforeValidator(_path)] | None = None
    sphere_facets: Annotated[Whole, Field(ge=20, le=5_000_000)] | None = None
    ellipsoid_axes: (
        tuple[
            Annotated[Number, Field(ge=1e-9, le=1e9)],
            Annotated[Number, Field(ge=1e-9, le=1e9)],
            Annotated[Number, Field(ge=1e-9, le=1e9)],
        ]
        | None
    ) = None
    facets: Annotated[Whole, Field(ge=20, le=5_000_000)] | None = None
    length_unit: Literal["km", "m"] = "km"
    diameter_km: Annotated[Number, Field(ge=1e-9, le=1e6, description="km")] | None = None
    spin_axis: Literal["file", "principal"] = "file"

    @staticmethod
    def clashes(given: set[str]) -> Iterator[_Clash]:
        """What is wrong with giving just these keys."""
        yield from _one_of(given, "file", "sphere_facets", "ellipsoid_axes", what="the shape")
        if "facets" in given and "ellipsoid_axes" not in given:
            yield "facets", "facets goes with ellipsoid_axes only (a sphere has sphere_facets, a file has its own)"
        if "ellipsoid_axes" in given and "facets" not in given:
            yield "ellipsoid_axes", "facets is missing: an ellipsoid needs it, a whole number from 20 to 5000000"
        if "sphere_facets" in given and "diameter_km" not in given:
            yield "sphere_facets", "diameter_km is missing: a sphere has no other size"

    @model_validator(mode="after")
    def _check(self) -> ShapeSource:
        _agree(self)
        return self


@_described
class Bulk:
    """How heavy the body is: exactly one of density_kg_m3 (bulk density, kg/m3) and mass_kg (kg). Raises BodyError."""

    density_kg_m3: Annotated[Number, Field(ge=1e-3, le=1e6, description="kg/m3")] | None = None
    mass_kg: Annotated[Number, Field(ge=1e-15, le=1e30, description="kg")] | None = None

    @staticmethod
    def clashes(given: set[str]) -> Iterator[_Clash]:
        """What is wrong with giving just these keys."""
        yield from _one_of(given, "density_kg_m3", "mass_kg", what="the mass")

    @model_validator(mode="after")
    def _check(self) -> Bulk:
        _agree(self)
        return self


@_described
class Surface:
    """What the ground does with sunlight and heat. Raises BodyError.

    bond_albedo : part of the sunlight that is scattered, 0 to 1
    emissivity : bolometric, above 0, at most 1
    thermal_inertia : sqrt(conductivity * density * heat capacity), J m-2 K-1 s-1/2, 0 to 10,000
    """

    bond_albedo: Annotated[Number, Field(ge=0.0, le=1.0)]
    emissivity: Annotated[Number, Field(gt=0.0, le=1.0)]
    thermal_inertia: Annotated[Number, Field(ge=0.0, le=10_000.0, description="J m-2 K-1 s-1/2")]

    @staticmethod
    def clashes(given: set[str]) -> Iterator[_Clash]:
        """What is wrong with giving just these keys: nothing."""
        return iter(())


@_described
class Spin:
    """Rotation about a principal axis; the pole by obliquity and azimuth, or by ecliptic coordinates. Raises BodyError.

    period_h : sidereal rotation period, hours
    obliquity_deg : angle between spin pole and orbit normal, 0 to 180 degrees
    pole_azimuth_deg : angle in the orbit plane, in the sense of motion, from the direction of perihelion to the
        projection of the pole, degrees; 0 when only the obliquity is given
    pole_ecliptic_deg : longitude and latitude of the pole, heliocentric ecliptic J2000, degrees
    """

    period_h: Annotated[Number, Field(ge=1e-6, le=1e6, description="hours")]
    obliquity_deg: Annotated[Number, Field(ge=0.0, le=180.0, description="degrees")] | None = None
    pole_azimuth_deg: Annotated[Angle, Field(description="degrees")] | None = None
    pole_ecliptic_deg: (
        Annotated[tuple[Angle, Annotated[Number, Field(ge=-90.0, le=90.0)]], Field(description="degrees")] | None
    ) = None

    @staticmethod
    def clashes(given: set[str]) -> Iterator[_Clash]:
        """What is wrong with giving just these keys."""
        if "pole_ecliptic_deg" in given and "pole_azimuth_deg" in given and "obliquity_deg" not in given:
            yield "pole_azimuth_deg", "pole_azimuth_deg goes with obliquity_deg, not with pole_ecliptic_deg"
        elif "pole_azimuth_deg" in given and "obliquity_deg" not in given:
            yield "pole_azimuth_deg", "obliquity_deg is missing: pole_azimuth_deg alone does not give the pole"
        else:
            yield from _one_of(given, "obliquity_deg", "pole_ecliptic_deg", what="the pole")

    @model_validator(mode="after")
    def _check(self) -> Spin:
        _agree(self)
        if self.obliquity_deg is not None and self.pole_azimuth_deg is None:
            object.__setattr__(self, "pole_azimuth_deg", 0.0)
        return self

    @property
    def rate(self) -> float:
        """Angular speed of rotation, rad/s."""
        return 2.0 * math.pi / (self.period_h * HOUR_S)


@_described
class Orbit:
    """Osculating elements, heliocentric ecliptic J2000, in au and degrees, at an epoch in TDB. Raises BodyError."""

    a_au: Annotated[Number, Field(ge=1e-3, le=1e5, description="au")]
    e: Annotated[Number, Field(ge=0.0, lt=E_LIMIT)]
    i_deg: Annotated[Number, Field(ge=0.0, le=180.0, description="degrees")] = 0.0
    node_deg: Annotated[Angle, Field(description="degrees")] = 0.0
    peri_deg: Annotated[Angle, Field(description="degrees")] = 0.0
    mean_anomaly_deg: Annotated[Angle, Field(description="degrees")] = 0.0
    epoch_jd_tdb: Annotated[Number, Field(ge=0.0, le=1e7, description="Julian date")] = 0.0

    @staticmethod
    def clashes(given: set[str]) -> Iterator[_Clash]:
        """What is wrong with giving just these keys: nothing."""
        return iter(())

    @property
    def mean_motion(self) -> float:
        """Mean angular speed, rad/s, of a body without mass (Kepler's third law)."""
        return math.sqrt(GM_SUN / (self.a_au * AU_M) ** 3)

    @property
    def period_s(self) -> float:
        """Sidereal orbital period, s."""
        return 2.0 * math.pi / self.mean_motion

    @property
    def axes(self) -> tuple[tuple[float, float, float], ...]:
        """Directions of perihelion, of the motion there, and of the orbit normal: three unit vectors, ecliptic frame.

        source : the rotation Rz(node) Rx(i) Rz(peri) of the textbooks
        """
        i, node, peri = math.radians(self.i_deg), math.radians(self.node_deg), math.radians(self.peri_deg)
        cos_i, sin_i, cos_n, sin_n = math.cos(i), math.sin(i), math.cos(node), math.sin(node)
        cos_p, sin_p = math.cos(peri), math.sin(peri)
        return (
            (cos_n * cos_p - sin_n * sin_p * cos_i, sin_n * cos_p + cos_n * sin_p * cos_i, sin_p * sin_i),
            (-cos_n * sin_p - sin_n * cos_p * cos_i, -sin_n * sin_p + cos_n * cos_p * cos_i, cos_p * sin_i),
            (sin_n * sin_i, -cos_n * sin_i, cos_i),
        )


@_described
class Solver:
    """How finely and by which road to solve. Raises BodyError.

    rotation_nodes : time nodes of one rotation, even
    orbit_places : places of the orbit at which heat is solved; None: chosen from the eccentricity
    light_places : places of the orbit at which light is summed; None: chosen
    shadows : whether facets shade one another
    lit_samples : points of a facet at which the Sun's visibility is asked; 1 is the centroid
    method : "lag", the periodic lag solver, or "march", the slow depth-marching reference
    march_steps : time steps of a rotation, at least 48, method "march" only
    halved_shape : repeat with half the facets, to say whether a denser shape would matter
    """

    rotation_nodes: Annotated[Whole, Field(ge=16, le=1024, multiple_of=2)] = 64
    orbit_places: Annotated[Whole, Field(ge=8, le=1024)] | None = None
    light_places: Annotated[Whole, Field(ge=8, le=8192)] | None = None
    shadows: Flag = True
    lit_samples: Annotated[Literal[1, 4, 16], BeforeValidator(_whole)] = 16
    method: Literal["lag", "march"] = "lag"
    march_steps: Annotated[Whole, Field(ge=48, le=8192)] = 96
    halved_shape: Flag = True

    @staticmethod
    def clashes(given: set[str]) -> Iterator[_Clash]:
        """What is wrong with giving just these keys: nothing."""
        return iter(())


@_described
class Body:
    """One body, described in full and checked; what every computation starts from.

    name : one line of text
    shape, bulk, surface, spin, orbit, solver : the sections, each a frozen dataclass
    raises : BodyError

    A pole on the orbit normal has no obliquity, whichever way it is given:
    >>> body = Body(
    ...     name="example", shape=ShapeSource(sphere_facets=320, diameter_km=0.5), bulk=Bulk(density_kg_m3=2000),
    ...     surface=Surface(bond_albedo=0.05, emissivity=0.9, thermal_inertia=200),
    ...     spin=Spin(period_h=6.0, pole_ecliptic_deg=(0.0, 90.0)), orbit=Orbit(a_au=1.2, e=0.1),
    ... )
    >>> body.obliquity < 1e-15
    True
    """

    name: Text
    shape: ShapeSource
    bulk: Bulk
    surface: Surface
    spin: Spin
    orbit: Orbit
    solver: Solver = Field(default_factory=lambda: Solver())

    @property
    def obliquity(self) -> float:
        """Angle between spin pole and orbit normal, rad, whichever way the pole was given."""
        if self.spin.obliquity_deg is not None:
            return math.radians(self.spin.obliquity_deg)
        along_p, along_q, along_n = self._pole_in_orbit()
        return math.atan2(math.hypot(along_p, along_q), along_n)

    @property
    def pole_azimuth(self) -> float:
        """Angle from perihelion, in the orbit plane towards the motion, to the projection of the pole, rad, 0 to 2 pi.

        Without meaning, but defined, where the pole stands on the orbit plane.
        """
        if self.spin.pole_azimuth_deg is not None:
            return math.radians(self.spin.pole_azimuth_deg) % (2.0 * math.pi)
        along_p, along_q, _ = self._pole_in_orbit()
        return math.atan2(along_q, along_p) % (2.0 * math.pi)

    @property
    def pole_ecliptic(self) -> tuple[float, float]:
        """Ecliptic longitude and latitude of the pole, rad, whichever way it was given."""
        if self.spin.pole_ecliptic_deg is not None:
            lon, lat = self.spin.pole_ecliptic_deg
            return math.radians(lon) % (2.0 * math.pi), math.radians(lat)
        tilt, azimuth = self.obliquity, self.pole_azimuth
        weights = (math.sin(tilt) * math.cos(azimuth), math.sin(tilt) * math.sin(azimuth), math.cos(tilt))
        x, y, z = (sum(w * axis[k] for w, axis in zip(weights, self.orbit.axes)) for k in range(3))
        return math.atan2(y, x) % (2.0 * math.pi), math.atan2(z, math.hypot(x, y))

    def _pole_in_orbit(self) -> tuple[float, float, float]:
        """Components of the pole towards perihelion, towards the motion there, and along the orbit normal."""
        lon, lat = self.pole_ecliptic
        pole = (math.cos(lat) * math.cos(lon), math.cos(lat) * math.sin(lon), math.sin(lat))
        along_p, along_q, along_n = (sum(s * x for s, x in zip(pole, axis)) for axis in self.orbit.axes)
        return along_p, along_q, along_n

    @property
    def rotations_per_orbit(self) -> float:
        """Sidereal rotations in one orbital period."""
        return self.orbit.period_s / (self.spin.period_h * HOUR_S)

    def changed(self, changes: Mapping[str, Any]) -> Body:
        """The same body with some keys changed, named like "spin.obliquity_deg"; None takes a key away.

        What can be given in two ways (mass, pole, shape) follows the change: a new obliquity replaces a pole given in
        ecliptic coordinates. Raises BodyError.
        """
        table, faults = _merge(self.to_dict(), changes.items())
        return _build(table, faults)

    def to_dict(self) -> dict[str, Any]:
        """Effective inputs as numbers, texts, lists, dictionaries, ready for JSON; without what is not set."""

        def plain(value: Any) -> Any:
            if isinstance(value, dict):
                return {key: plain(one) for key, one in value.items() if one is not None}
            if isinstance(value, tuple):
                return list(value)
            return str(value) if isinstance(value, Path) else value

        return typing.cast("dict[str, Any]", plain(asdict(self)))

    def to_toml(self) -> str:
        """The effective inputs as text that `read_body` accepts back."""
        table = self.to_dict()
        lines = [f"name = {_toml(table.pop('name'))}"]
        for section, keys in table.items():
            lines += ["", f"[{section}]", *(f"{key} = {_toml(value)}" for key, value in keys.items())]
        return "\n".join(lines) + "\n"


def _toml(value: Any) -> str:
    if isinstance(value, list):
        return f"[{', '.join(_toml(one) for one in value)}]"
    if isinstance(
        value, (bool, str)
    ):  # JSON writes both as TOML does, control characters aside, which we do not let in
        return json.dumps(value, ensure_ascii=False)
    return repr(value)


_SECTIONS: dict[str, Any] = {
    "shape": ShapeSource, "bulk": Bulk, "surface": Surface, "spin": Spin, "orbit": Orbit, "solver": Solver,
}  # fmt: skip
_SECTION_OF = {cls.__name__: section for section, cls in _SECTIONS.items()}
# Ways of giving the same thing: a change to one puts the others aside.
_WAYS = {
    "shape": ({"file"}, {"sphere_facets"}, {"ellipsoid_axes", "facets"}),
    "bulk": ({"density_kg_m3"}, {"mass_kg"}),
    "spin": ({"obliquity_deg", "pole_azimuth_deg"}, {"pole_ecliptic_deg"}),
}


def _keys(cls: Any) -> dict[str, Any]:
    return typing.cast("dict[str, Any]", cls.__pydantic_fields__)


# --- faults, in words -------------------------------------------------------------------------------------------
_Fault = tuple[str, str]  # dotted key, for its line, and the message


def _suggest(section: str, key: str) -> tuple[str, str]:
    """The nearest right name for an unknown one, as (dotted name or "", words)."""
    everything = {f"{s}.{k}": k for s, cls in _SECTIONS.items() for k in _keys(cls)}
    elsewhere = [dotted for dotted, k in everything.items() if k == key]
    if elsewhere:
        return elsewhere[0], f"it belongs in [{elsewhere[0].partition('.')[0]}]"
    if section in _SECTIONS:
        near = difflib.get_close_matches(key, _keys(_SECTIONS[section]), n=1, cutoff=0.5)
        if near:
            return f"{section}.{near[0]}", f"did you mean {near[0]}?"
    else:
        near = difflib.get_close_matches(key, ["name", *_SECTIONS], n=1, cutoff=0.6)
        if near:
            return near[0], f"did you mean {near[0] if near[0] == 'name' else f'[{near[0]}]'}?"
    near = difflib.get_close_matches(key, everything.values(), n=1, cutoff=0.7)
    if near:
        dotted = next(d for d, k in everything.items() if k == near[0])
        return dotted, f"did you mean {dotted}?"
    known = _keys(_SECTIONS[section]) if section in _SECTIONS else ["name", *(f"[{s}]" for s in _SECTIONS)]
    return "", f"known here: {', '.join(known)}"


def _unknown(section: str, key: str, value: Any) -> tuple[str, str]:
    key_shown = key if re.fullmatch(r"[A-Za-z0-9_.-]{1,60}", key) else _shown(key)
    nearest, words = _suggest(section, key)
    if not section and isinstance(value, Mapping):
        return nearest, f"[{key_shown}] is not a section: {words}"
    return nearest, f"{section + '.' if section else ''}{key_shown} is not a key: {words}"


def _wrong(section: str, key: str, value: Any) -> str:
    """What is wrong with the value of a known key."""
    info = _keys(_SECTIONS[section])[key] if section else _keys(Body)[key]
    allowed = _allowed(info.annotation, info.metadata, info.description)
    must = f"{section + '.' if section else ''}{key} = {_shown(value)} must be {allowed}"
    if (section, key) == ("orbit", "e") and isinstance(value, (int, float)) and not isinstance(value, bool):
        if value >= 1:
            return f"{must}: an open orbit has no mean rate"
        if value >= E_LIMIT:
            return f"{must}: so close to open, the solver is not good enough"
    return must


def _missing(section: str, key: str) -> str:
    if not section and key in _SECTIONS:
        needed = [k for k, info in _keys(_SECTIONS[key]).items() if info.is_required()]
        needed += [message.partition(": give ")[2] for _, message in _SECTIONS[key].clashes(set())]
        return f"section [{key}] is missing: it needs {', '.join(needed)}"
    info = _keys(_SECTIONS[section])[key] if section else _keys(Body)[key]
    allowed = _allowed(info.annotation, info.metadata, info.description)
    return f"{section + '.' if section else ''}{key} is missing: {allowed}"


def _faults(error: ValidationError, table: Mapping[str, Any], section: str = "") -> list[_Fault]:
    """Pydantic's findings as (dotted key, message), once per key; `table` is what was given, section by section."""
    unknown: dict[str, _Fault] = {}
    missing: dict[str, _Fault] = {}
    other: dict[str, _Fault] = {}
    failed: set[str] = set()
    for found in error.errors(include_url=False):
        where = ([section] if section else []) + [str(part) for part in found["loc"]]
        place, key = (where[0], where[1]) if len(where) > 1 else ("", where[0])
        if where[0] in _SECTIONS and len(where) == 1 and found["type"] == "clash":
            for one, message in found["ctx"]["clashes"]:
                other[f"{key}: {message}"] = (f"{key}.{one}" if one else key, f"in [{key}], {message}")
            continue
        dotted = f"{place}.{key}" if place else key
        if place:
            failed.add(place)
        inside = table.get(place, {}) if place else table
        value = inside.get(key, found["input"]) if isinstance(inside, Mapping) else found["input"]
        if found["type"] in ("unexpected_keyword_argument", "extra_forbidden"):
            nearest, message = _unknown(place, key, value)
            unknown[dotted] = (dotted, message)
            missing.setdefault(f"near {nearest}", (nearest, ""))
        elif len(where) <= 2 and found["type"] in ("missing", "missing_keyword_only_argument"):
            missing[dotted] = (place or dotted, _missing(place, key))
        elif not place and key in _SECTIONS:
            other[dotted] = (dotted, f"{key} = {_shown(value)} must be a section, [{key}] with keys of its own")
        else:
            other[dotted] = (dotted, _wrong(place, key, value))
    for place in failed:  # pydantic stops at the first kind of fault; say at once what else is wrong with the section
        given = table.get(place)
        if isinstance(given, Mapping):
            hinted = {k[5 + len(place) + 1 :] for k in missing if k.startswith(f"near {place}.")}
            for key, message in _SECTIONS[place].clashes({k for k, v in given.items() if v is not None} | hinted):
                other[f"{place}: {message}"] = (f"{place}.{key}" if key else place, f"in [{place}], {message}")
    near = {k[5:] for k in missing if k.startswith("near ")}
    kept = [fault for dotted, fault in missing.items() if not dotted.startswith("near ") and dotted not in near]
    return [*unknown.values(), *kept, *other.values()]


def _as_error(faults: list[_Fault], where: Callable[[str], str] = lambda key: "", shown: str = "") -> BodyError:
    """All faults in one error, in the order of their lines; the whole in one line, and line by line in its details."""
    lines = sorted((where(key) + message for key, message in faults), key=_line_number)
    if len(lines) > MOST_FAULTS:
        lines = [*lines[:MOST_FAULTS], f"and {len(lines) - MOST_FAULTS} more faults"]
    short = [lines[0], *(line.removeprefix(f"{shown}, ").removeprefix(f"{shown}: ") for line in lines[1:])]
    return BodyError("; ".join(short), lines=lines, keys=[key for key, _ in faults])


def _line_number(line: str) -> int:
    found = re.search(r", line (\d+): ", line)
    return int(found[1]) if found else 1_000_000


# --- reading ----------------------------------------------------------------------------------------------------
_HEADER = re.compile(r"\s*\[\[?\s*([^\]#]+?)\s*\]")
_KEY = re.compile(
    r"""\s*((?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*'))*)\s*="""
)


def _plain(dotted: str) -> str:
    return ".".join(part.strip().strip("\"'") for part in dotted.split("."))


def _lines_of_keys(text: str) -> dict[str, int]:
    """Line number, from 1, of every section and dotted key of a TOML text: a scan good enough to point a finger."""
    found: dict[str, int] = {}
    section, inside = "", ""
    for number, line in enumerate(text.replace("\r\n", "\n").split("\n"), 1):
        if not inside:
            if header := _HEADER.match(line):
                section = _plain(header[1])
                found.setdefault(section, number)
            elif key := _KEY.match(line):
                dotted = _plain(f"{section}.{key[1]}" if section else key[1])
                found.setdefault(dotted, number)
                found.setdefault(dotted.rpartition(".")[0], number)
        for quotes in ('"""', "'''"):
            if (not inside or inside == quotes) and line.count(quotes) % 2:
                inside = "" if inside else quotes
    found.pop("", None)
    return found


def _parse(text: str, shown: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        what, at, place = str(error).rpartition(" (at ")
        line = re.match(r"line (\d+)", place)
        number = line[1] if line else str(text.rstrip().count("\n") + 1)
        what = what if at else str(error)
        what += " (text stands in quotes)" if what == "Invalid value" else ""
        raise BodyError(f"{shown}, line {number}: not valid TOML: {_one_line(what)}") from None
    except RecursionError:
        raise BodyError(f"{shown}: not valid TOML: brackets nested too deep") from None
    except ValueError as error:  # from int() and datetime, which tomllib lets through
        reason = "a number of thousands of digits" if "digits" in str(error) else _one_line(str(error))
        raise BodyError(f"{shown}: not valid TOML: {reason}") from None


def _one_line(text: str) -> str:
    return "".join(c if c.isprintable() else ascii(c)[1:-1] for c in text)[:200]


def _parse_change(change: str) -> tuple[str, Any]:
    """Key and value of "section.key=value"; the value is read as TOML, and as text if that fails."""
    key, equals, text = change.partition("=")
    if not equals or not key.strip():
        raise BodyError(f"change {_shown(change)} must look like section.key=value")
    try:
        table = tomllib.loads(f"value = {text.strip()}")
        if set(table) != {"value"}:
            raise ValueError
        return key.strip(), table["value"]
    except (ValueError, RecursionError):
        return key.strip(), text.strip()


def _merge(table: dict[str, Any], changes: Iterable[tuple[str, Any]]) -> tuple[dict[str, Any], list[_Fault]]:
    """A copy of the table with the changes in place, and what is wrong with the names of the changes."""
    merged = {key: dict(value) if isinstance(value, dict) else value for key, value in table.items()}
    faults: list[_Fault] = []
    new: dict[str, dict[str, Any]] = {}
    for dotted, value in changes:
        section, _, key = str(dotted).rpartition(".")
        if not section and key == "name":
            merged["name"] = value
        elif section in _SECTIONS and key in _keys(_SECTIONS[section]):
            new.setdefault(section, {})[key] = value
        elif not section and key in _SECTIONS:
            faults.append(
                (key, f"{key} is a section: change a key of it, such as {key}.{next(iter(_keys(_SECTIONS[key])))}")
            )
        elif section in _SECTIONS or not section:
            faults.append((str(dotted), _unknown(section, key, value)[1]))
        else:
            known = _suggest("", section)[1] if key not in {k for c in _SECTIONS.values() for k in _keys(c)} else ""
            words = known or _suggest("", key)[1]
            faults.append((str(dotted), f"{_one_line(str(dotted))} is not a key: {words}"))
    for section, keys in new.items():
        old = merged.get(section, {})
        if not isinstance(old, dict):
            continue  # a fault of its own, found by the validation
        aside: set[str] = set()
        for way in _WAYS.get(section, ()):
            if way & {key for key, value in keys.items() if value is not None}:
                aside |= set().union(*(other for other in _WAYS[section] if other is not way))
        kept = {key: value for key, value in old.items() if key not in aside}
        merged[section] = {key: value for key, value in {**kept, **keys}.items() if value is not None}
    return merged, faults


def _build(
    table: Mapping[str, Any], faults: list[_Fault], where: Callable[[str], str] = lambda key: "", shown: str = ""
) -> Body:
    try:
        body = _validate(table)
    except ValidationError as error:
        raise _as_error([*faults, *_faults(error, table)], where, shown) from None
    if faults:
        raise _as_error(faults, where, shown)
    return body


def _validate(table: Mapping[str, Any]) -> Body:
    return typing.cast("Body", Body.__pydantic_validator__.validate_python(dict(table)))  # type: ignore[attr-defined]


def read_body(path: str | os.PathLike[str], changes: Iterable[str] = ()) -> Body:
    """Read a body file (TOML), with changes if wanted, and check it.

    path : the file; a relative shape.file in it is looked for from its folder
    changes : texts "section.key=value", the value as TOML or as a bare word; they replace what the file says, and a
        shape.file among them is looked for from the working folder
    raises : BodyError, naming file, line, key, value and what is allowed
    warns : Note, where a value is allowed but looks like a slip of units
    """
    shown = _one_line(os.fspath(path))
    text = _read_text(path, shown)
    table = _parse(text, shown)
    source = table.get("shape")
    if isinstance(source, dict) and isinstance(source.get("file"), str) and source["file"].strip():
        source["file"] = os.path.join(os.path.dirname(os.path.abspath(path)), source["file"])
    pairs = [_parse_change(change) for change in changes]
    lines = _lines_of_keys(text)
    by_change = {key for key, _ in pairs}

    def where(key: str) -> str:
        if key in by_change:
            return f"{shown}, as changed: "
        line = lines.get(key) or lines.get(key.partition(".")[0])
        return f"{shown}, line {line}: " if line else f"{shown}: "

    merged, faults = _merge(table, pairs)
    body = _build(merged, faults, where, shown)
    for remark in _remarks(body, merged):
        warnings.warn(f"{shown}: {remark}", Note, stacklevel=2)
    return body


def _read_text(path: str | os.PathLike[str], shown: str) -> str:
    try:
        with open(path, "rb") as file:
            raw = file.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        raise BodyError(f"{shown}: cannot read the body file: {reason}") from None
    if len(raw) > LARGEST_FILE:
        raise BodyError(f"{shown}: larger than {LARGEST_FILE} bytes, which is no body file")
    if not raw.strip():
        raise BodyError(f"{shown}: the body file is empty")
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise BodyError(f"{shown}, line {line}: not text in UTF-8, which a body file must be") from None


def _remarks(body: Body, table: Mapping[str, Any]) -> Iterator[str]:
    """What is allowed but would surprise whoever wrote it."""
    density = body.bulk.density_kg_m3
    if density is not None and not 100.0 <= density <= 12_000.0:
        hint = f", {density:g} g/cm3 would be {density * 1000:g}" if density < 100.0 else ""
        yield f"bulk.density_kg_m3 = {density:g} is far from that of rock, ice or metal{hint}"
    if body.orbit.a_au * (1.0 - body.orbit.e) < 0.00465:  # solar radius, au: IAU 2015 Resolution B3, 6.957e8 m
        yield f"perihelion at {body.orbit.a_au * (1.0 - body.orbit.e):.3g} au lies inside the Sun"
    if body.spin.pole_ecliptic_deg is not None:
        absent = [key for key in ("i_deg", "node_deg", "peri_deg") if key not in table["orbit"]]
        if absent:
            yield f"{', '.join(absent)} of [orbit] taken as 0, though the obliquity follows from them here"
