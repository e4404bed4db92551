"""One body over a grid of inputs: cell by cell, kept as it goes, taken up again where it was stopped.

The finished file does not depend on how often and where the run was stopped: its bytes are the same.
"""

from __future__ import annotations

import dataclasses
import hashlib
import itertools
import json
import math
import time
import warnings
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from smallbody.body import Body, ShapeSource
from smallbody.errors import BodyError, Note, SmallbodyError, StoreError
from smallbody.quantity import Quantity
from smallbody.store import Parts, Stored, joined, load, peek, plan_hash
from smallbody.workers import SILENT, Meter

if TYPE_CHECKING:
    from smallbody.light import Horizons
    from smallbody.push import Drift, SourceRates
    from smallbody.shape import Shape

SOURCES = ("thermal", "scattered", "direct")
RATES = {  # name in a result: unit, what it is
    "da_dt_au_per_myr": ("au/Myr", "mean rate of the semi-major axis"),
    "da_dt_m_per_yr": ("m/yr", "mean rate of the semi-major axis"),
    "de_dt_per_myr": ("1/Myr", "mean rate of the eccentricity"),
    "di_dt_deg_per_myr": ("deg/Myr", "mean rate of the inclination"),
    "dnode_dt_deg_per_myr": ("deg/Myr", "mean rate of the node"),
    "dperi_dt_deg_per_myr": ("deg/Myr", "mean rate of the argument of perihelion"),
    "dmean_anomaly_dt_deg_per_myr": ("deg/Myr", "mean rate of the mean anomaly at epoch"),
    "domega_dt_rad_per_d2": ("rad/d2", "mean rate of the spin"),
    "dobliquity_dt_deg_per_myr": ("deg/Myr", "mean rate of the obliquity"),
    "dazimuth_dt_deg_per_myr": ("deg/Myr", "mean rate of the pole's azimuth"),
    "doubling_time_myr": ("Myr", "time in which the spin changes by itself"),
}
UNITS = {  # of an input, by the end of its name
    "_kg_m3": "kg/m3", "_kg": "kg", "_deg": "deg", "_km": "km", "_au": "au", "_h": "h", "_tdb": "d",
    "thermal_inertia": "J m-2 K-1 s-1/2",
}  # fmt: skip
SHAPES_SKY = ("solver.rotation_nodes", "solver.lit_samples")  # what the table of horizons depends on besides the shape
COMMIT_S = 1.0  # finished cells are on the disk after this long: cells that take longer, each at once
NOT_YET = "not computed yet"
Cell = dict[str, float]  # value by key


@dataclass(frozen=True)
class Sweep:
    """Rates over a grid of inputs.

    body : the body in all that is not swept
    over : values by key, in the order of the axes
    arrays : a coordinate per key, named by it with "_" for "."; for every rate R of a `Drift`, over the grid: R, its
        numerical error R_error, and R_thermal, R_scattered, R_direct; the drift of the sphere theory; the energy
        balance; `error`, empty where the cell went well (its rates are NaN where not), and `notes`
    attrs : inputs, versions, hash of the shape and of the plan
    """

    body: Body
    over: Mapping[str, tuple[float, ...]]
    arrays: Mapping[str, Quantity]
    attrs: Mapping[str, Any]

    @property
    def name(self) -> str:
        """Name of the body."""
        return self.body.name

    @property
    def failed(self) -> list[tuple[Cell, str]]:
        """The cells that failed, as their inputs and what went wrong."""
        errors = self.arrays["error"].values.ravel()
        return [(cell, error) for cell, error in zip(_cells(self.over), errors) if error]

    def stored(self) -> Stored:
        """What a file holds."""
        return Stored("sweep", self.arrays, self.attrs)


def sweep(
    body: Body,
    over: Mapping[str, Sequence[float]],
    *,
    out: Path | str | None = None,
    meter: Meter = SILENT,
) -> Sweep:
    """Mean rates of orbit and spin for every combination of the values given.

    body : Body; its solver.halved_shape is not followed (one `drift` tells whether the shape is dense enough)
    over : values by key, the key as in a body file: {"spin.obliquity_deg": [0, 45, 90], "surface.emissivity": [0.9, 1]}
    out : HDF5 file to write. Finished cells are kept in `out`.parts/ until all are done; called again after it was
        stopped (Ctrl-C, a kill, a power cut), it goes on from there. A file that holds this very sweep is not computed
        again.
    meter : told of progress, in cells
    returns : Sweep; a cell that fails is NaN with the reason in `error`, and a Note says how many there are
    raises : BodyError, if a key or a value is not allowed; ShapeError; StoreError, if `out` cannot be written or an
        unfinished run of another plan is in the way
    """
    values = _checked(body, over)
    body = body.changed({"solver.halved_shape": False})
    shapes = _Shapes(body, values)
    plan = _plan(body, values)
    attrs = _attrs(plan, shapes)
    if out is None:
        rows = list(_compute(body, values, set(), shapes, meter))
        return _report(Sweep(body, values, _assemble(plan, [Stored("segment", _table(rows))]), attrs))
    out = Path(out)
    with Parts(out.with_name(out.name + ".parts"), plan) as parts:
        kept = _kept(out, parts.plan_sha256)
        if kept is not None:
            parts.remove()
            warnings.warn(f"{out} already holds this sweep; remove it to have it computed anew", Note, stacklevel=2)
            return _report(Sweep(body, values, kept.arrays, kept.attrs))
        done = {int(i) for segment in parts.read() for i in segment.arrays["cell"].values}
        rows, last = [], time.monotonic()
        try:
            for row in _compute(body, values, done, shapes, meter):
                rows.append(row)
                if time.monotonic() - last >= COMMIT_S:
                    parts.keep(_table(rows))
                    rows, last = [], time.monotonic()
        finally:  # Ctrl-C too leaves nothing behind that was finished
            if rows:
                parts.keep(_table(rows))
        result = Sweep(body, values, _assemble(plan, parts.read()), attrs)
        parts.finish(result.stored(), out)
    return _report(result)


def so_far(folder: Path | str) -> Stored:
    """What is done of a sweep in progress, read beside it; the rest is NaN.

    folder : the `.parts` folder
    raises : StoreError, if it is not that of a sweep
    """
    plan, segments = peek(folder)
    if plan.get("kind") != "sweep":
        raise StoreError(f"{folder} is not the folder of an unfinished sweep")
    return Stored("sweep", _assemble(plan, segments), {"name": plan["body"]["name"]})


def _cells(over: Mapping[str, Sequence[float]]) -> Iterator[Cell]:
    """All combinations, the last key fastest: the order of the grid's arrays."""
    for combination in itertools.product(*over.values()):
        yield dict(zip(over, combination))


def _checked(body: Body, over: Mapping[str, Sequence[float]]) -> dict[str, tuple[float, ...]]:
    """The grid as numbers, every value tried on the body before hours are spent."""
    if not over:
        raise BodyError("nothing to sweep over: give at least one key with its values")
    values = {}
    for key, given in over.items():
        try:
            values[key] = tuple(float(v) for v in given)
        except (TypeError, ValueError):
            raise BodyError(f"{key}: a sweep goes over numbers, not over {given!r:.60}") from None
        if not values[key]:
            raise BodyError(f"{key}: no values to sweep over")
        if len(set(values[key])) < len(values[key]):
            raise BodyError(f"{key}: a value is given twice")
    first = {key: some[0] for key, some in values.items()}
    for key, some in values.items():
        for value in some:
            body.changed({**first, key: value})
    return values


# the plan


def _plan(body: Body, over: Mapping[str, tuple[float, ...]]) -> dict[str, Any]:
    """All that the numbers follow from; the shape's file by its content, so that it may move."""
    from smallbody.push.rates import versions

    described = body.to_dict()
    content = None
    if body.shape.file is not None:
        described["shape"].pop("file")
        content = hashlib.sha256(body.shape.file.read_bytes()).hexdigest()
    return {
        "kind": "sweep",
        "body": described,
        "shape_file_sha256": content,
        "over": [[key, list(some)] for key, some in over.items()],
        "versions": versions(),
    }


def _attrs(plan: Mapping[str, Any], shapes: _Shapes) -> dict[str, Any]:
    attrs = {
        "name": plan["body"]["name"],
        "body_toml": shapes.body.to_toml(),
        "over_json": json.dumps(dict(plan["over"])),
        "versions": json.dumps(plan["versions"]),
        "plan_sha256": plan_hash(plan),
    }
    if shapes.only is not None:
        attrs["shape_sha256"] = shapes.only.sha256
    return attrs


def _kept(out: Path, plan_sha256: str) -> Stored | None:
    """The finished file, if it is of the same plan."""
    if not out.is_file():
        return None
    try:
        there = load(out)
    except StoreError:
        return None  # whatever it is, it is replaced, as by any program that is told to write there
    return there if there.kind == "sweep" and there.attrs.get("plan_sha256") == plan_sha256 else None


# shapes and skies, each prepared once


class _Shapes:
    """The shape and the horizons of each cell. Those of the last cell are kept: cells that share them come together."""

    def __init__(self, body: Body, over: Mapping[str, tuple[float, ...]]) -> None:
        self.body = body
        self.turns = [key for key in over if key.startswith("shape.") or key in SHAPES_SKY]
        # sizes differ by a factor only; all are scaled from the first one asked for, whichever cell comes first
        self.base_km = over.get("shape.diameter_km", (body.shape.diameter_km,))[0]
        self._shape: tuple[ShapeSource, Shape] | None = None
        self._sky: tuple[tuple[Any, ...], Horizons] | None = None
        first = self._base(self._source(body.changed({key: over[key][0] for key in self.turns})))
        self.only = None if any(key.startswith("shape.") for key in over) else first

    def order(self, cell: Cell) -> list[float]:
        """What to sort cells by, so that those that share a shape come together."""
        return [cell[key] for key in self.turns if key != "shape.diameter_km"]

    def of(self, body: Body) -> tuple[Shape, Horizons | None]:
        """Shape and horizons of one cell; no horizons where nothing casts a shadow."""
        source = self._source(body)
        shape, sky = self._base(source), None
        if body.solver.shadows:
            sky = self._base_sky(source, shape, body.solver.rotation_nodes, body.solver.lit_samples)
        if body.shape.diameter_km is not None and self.base_km is not None and body.shape.diameter_km != self.base_km:
            factor = body.shape.diameter_km / self.base_km
            shape = shape.scaled(factor)
            sky = sky and dataclasses.replace(sky, samples=sky.samples * factor)
        return shape, sky

    def _source(self, body: Body) -> ShapeSource:
        if body.shape.diameter_km is None:
            return body.shape
        return dataclasses.replace(body.shape, diameter_km=self.base_km)

    def _base(self, source: ShapeSource) -> Shape:
        from smallbody.shape import prepare_shape

        if self._shape is None or self._shape[0] != source:
            self._shape = source, prepare_shape(source)
        return self._shape[1]

    def _base_sky(self, source: ShapeSource, shape: Shape, nodes: int, lit_samples: int) -> Horizons:
        from smallbody.light import horizons_of

        key = source, nodes, lit_samples
        if self._sky is None or self._sky[0] != key:
            self._sky = key, horizons_of(shape, nodes, lit_samples)
        return self._sky[1]


# cells


@dataclass(frozen=True)
class _Row:
    cell: int
    value: np.ndarray  # (source_total, rate)
    error: np.ndarray  # (rate,)
    sphere: float
    scale: float
    balance: float
    fault: str
    notes: str


def _compute(
    body: Body, over: Mapping[str, tuple[float, ...]], done: set[int], shapes: _Shapes, meter: Meter
) -> Iterator[_Row]:
    todo = [(i, cell) for i, cell in enumerate(_cells(over)) if i not in done]
    todo.sort(key=lambda item: (shapes.order(item[1]), item[0]))
    meter.start("sweep", len(todo))
    try:
        for number, cell in todo:
            yield _row(number, body, cell, shapes)
            meter.step()
    finally:
        meter.stop()


def _row(number: int, body: Body, cell: Cell, shapes: _Shapes) -> _Row:
    from smallbody import push

    def failed(fault: str) -> _Row:
        nothing = np.full((1 + len(SOURCES), len(RATES)), np.nan)
        return _Row(number, nothing, nothing[0], math.nan, math.nan, math.nan, _one_line(fault), "")

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", Note)  # they are kept in the row, and told once at the end
            changed = body.changed(cell)
            shape, horizons = shapes.of(changed)
            result = push.drift(changed, shape=shape, horizons=horizons)
    except SmallbodyError as error:
        return failed(str(error))
    except Exception as error:  # a cell must not take the night's other cells with it
        return failed(f"{type(error).__name__}: {error}")
    value, error_of = _numbers(result)
    notes = "; ".join(_one_line(note) for note in result.notes)
    checks = result.checks
    return _Row(
        number, value, error_of, result.sphere.da_dt_au_per_myr, checks.spin_scale_rad_per_d2, checks.energy_balance,
        "", notes,
    )  # fmt: skip


def _numbers(result: Drift) -> tuple[np.ndarray, np.ndarray]:
    parts: list[Drift | SourceRates] = [result, *(result.by_source[source] for source in SOURCES)]
    together = [{**vars(part.orbit), **vars(part.spin)} for part in parts]
    value = np.array([[rates[key].value for key in RATES] for rates in together])
    return value, np.array([together[0][key].numerical_error for key in RATES])


def _one_line(text: str) -> str:
    return " ".join(text.split())


def _table(rows: list[_Row]) -> dict[str, Quantity]:
    def column(values: list[Any], about: str, units: str = "1", dims: tuple[str, ...] = ()) -> Quantity:
        return Quantity(np.array(values), ("cell", *dims), units, about)

    def text(values: list[str], about: str) -> Quantity:
        return Quantity(np.array(values, dtype=object), ("cell",), "", about)

    return {
        "cell": column([r.cell for r in rows], "number of the cell, the last key fastest"),
        "value": column([r.value for r in rows], "rates, units in their names", dims=("source_total", "rate")),
        "value_error": column([r.error for r in rows], "numerical errors of the rates", dims=("rate",)),
        "source_total": Quantity(
            np.array(["total", *SOURCES], object), ("source_total",), "", "cause, or all together"
        ),
        "rate": Quantity(np.array(list(RATES), object), ("rate",), "", "name of the rate"),
        "sphere": column([r.sphere for r in rows], "drift of the linear theory of the sphere", "au/Myr"),
        "spin_scale": column([r.scale for r in rows], "natural scale of spin rates", "rad/d2"),
        "energy_balance": column([r.balance for r in rows], "(emitted - absorbed)/absorbed"),
        "error": text([r.fault for r in rows], "what went wrong"),
        "notes": text([r.notes for r in rows], "what is worth knowing"),
    }


# from cells to the grid


def _assemble(plan: Mapping[str, Any], segments: list[Stored]) -> dict[str, Quantity]:
    over = {key: tuple(some) for key, some in plan["over"]}
    rows = joined(segments, "cell")
    shape = tuple(len(some) for some in over.values())
    dims = tuple(key.replace(".", "_") for key in over)

    def gridded(column: str, blank: Any, *at: int) -> np.ndarray:
        flat = np.full(math.prod(shape), blank, dtype=object if isinstance(blank, str) else float)
        if rows:
            index: Any = (slice(None), *at)
            flat[rows["cell"].values] = rows[column].values[index]
        return flat.reshape(shape)

    def number(units: str, about: str, column: str, *at: int) -> Quantity:
        return Quantity(gridded(column, np.nan, *at), dims, units, about)

    arrays = {dim: Quantity(np.array(over[key]), (dim,), unit_of(key), key) for key, dim in zip(over, dims)}
    for j, (rate, (units, about)) in enumerate(RATES.items()):
        arrays[rate] = number(units, about, "value", 0, j)
        arrays[f"{rate}_error"] = number(units, f"{about}, numerical error", "value_error", j)
        for i, source in enumerate(SOURCES, 1):
            arrays[f"{rate}_{source}"] = number(units, f"{about}, {source} part", "value", i, j)
    arrays["sphere_da_dt_au_per_myr"] = number("au/Myr", "mean rate of the semi-major axis, sphere theory", "sphere")
    arrays["spin_scale_rad_per_d2"] = number("rad/d2", "natural scale of spin rates", "spin_scale")
    arrays["energy_balance"] = number("1", "(emitted - absorbed)/absorbed, orbit and whole surface", "energy_balance")
    arrays["error"] = Quantity(gridded("error", NOT_YET), dims, "", "what went wrong; empty where nothing did")
    arrays["notes"] = Quantity(gridded("notes", ""), dims, "", "what is worth knowing")
    return arrays


def unit_of(key: str) -> str:
    """Unit of an input, from its key; "1" for a number without one."""
    return next((unit for end, unit in UNITS.items() if key.endswith(end)), "1")


def _report(result: Sweep) -> Sweep:
    """Say once, at the end, what went wrong and what is not as exact as one would wish."""
    failed, cells = result.failed, math.prod(len(some) for some in result.over.values())
    if failed:
        cell, error = failed[0]
        where = ", ".join(f"{key} = {value:g}" for key, value in cell.items())
        warnings.warn(f"{len(failed)} of {cells} cells failed; the first, {where}: {error}", Note, stacklevel=3)
    noted = [text for text in result.arrays["notes"].values.ravel() if text]
    if noted:
        warnings.warn(f"notes on {len(noted)} of {cells} cells; the first: {noted[0]}", Note, stacklevel=3)
    return result
