"""Who sees the Sun: the blocked stretches of sky of every facet, tabulated once for a shape."""

from __future__ import annotations

import hashlib
import os
import tempfile
import time
import warnings
from contextlib import suppress
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np

from smallbody.errors import Note, SizeMismatch
from smallbody.shape import Shape, facet_samples
from smallbody.workers import SILENT, Meter, share

LAYOUT = 3  # of the cached table; part of its name, so that an older table is never mistaken for a newer one
WORTH_KEEPING_S = 0.25  # a table that took less to build is not written to the cache
CACHE_BYTES = 2 << 30  # the cache is trimmed to this, oldest tables first
SLACK = 1e-9  # in body diameters: coplanar neighbours stand this much over each other by round-off
BLOCK = 64  # facets in a block of work
ROWS = 1024  # rows of the table that are taken in hand at once where a coarser one is drawn from it
LEFT_OVER_S = 24 * 3600.0  # temporary files in the cache that are older were left by a process that was killed


@dataclass(frozen=True)
class Horizons:
    """Blocked intervals of sin(latitude) on `columns` meridians of the sky of every sample point.

    columns : meridians; meridian c of sample s has the body longitude 2 pi (c + shifts[s]) / columns
    shifts : (s,) float
    samples : (f, s, 3) the points, m
    rows : (f,) int32, -1 for a facet with nothing over its own plane, else its row in the table
    starts : (r*s*columns + 1,) int32, int64 if need be; where the intervals of a meridian begin in `low` and `high`
    low, high : (n,) float32, sin(latitude) of the ends of the blocked intervals, ascending on each meridian; -2 or 2
        where an interval holds the pole
    """

    columns: int
    shifts: np.ndarray
    samples: np.ndarray
    rows: np.ndarray
    starts: np.ndarray
    low: np.ndarray
    high: np.ndarray

    @cached_property
    def overshadowed(self) -> np.ndarray:
        """(f,) bool: does anything rise over the facet's own plane, so that it may be shaded while turned sunward?"""
        return np.asarray(self.rows >= 0)

    @cached_property
    def meridians(self) -> tuple[np.ndarray, np.ndarray]:
        """cos and sin of the longitude of every sample's meridians, (s, columns) each."""
        return _meridians(self.columns, self.shifts)

    @property
    def overshadowed_fraction(self) -> float:
        """Share of the facets that are overshadowed, by number."""
        return float(np.mean(self.overshadowed))

    @cached_property
    def shadowed_facets(self) -> np.ndarray:
        """(r,) int64: the facet of each row."""
        return np.flatnonzero(self.overshadowed)

    def thinned(self) -> Horizons:
        """The same table with every second meridian only: what a coarser run would have seen."""
        return self._only(slice(None), slice(None, None, 2), columns=self.columns // 2, shifts=self.shifts / 2)

    def sampled_coarser(self) -> Horizons:
        """The same table asked at a quarter of the sample points: those of the next coarser set, which it contains."""
        few = slice(3, None, 4)
        return self._only(few, slice(None), samples=self.samples[:, few], shifts=self.shifts[few])

    def _only(self, points: slice, meridians: slice, **changes: Any) -> Horizons:
        """The intervals of some samples and meridians. Block by block: whole tables beside this one cost memory."""
        s, per_row = len(self.shifts), len(self.shifts) * self.columns
        counts, low, high = [np.empty(0, np.uint8)], [self.low[:0]], [self.high[:0]]
        for first in range(0, len(self.shadowed_facets), ROWS):
            starts = self.starts[first * per_row : (first + ROWS) * per_row + 1]
            per = np.diff(starts).reshape(-1, s, self.columns).astype(np.uint8)
            keep = np.zeros(per.shape, bool)
            keep[:, points, meridians] = True
            of_interval = np.repeat(keep.ravel(), per.ravel())
            counts.append(per[:, points, meridians].ravel())
            low.append(self.low[starts[0] : starts[-1]][of_interval])
            high.append(self.high[starts[0] : starts[-1]][of_interval])
        return replace(
            self, starts=_starts(np.concatenate(counts)), low=np.concatenate(low), high=np.concatenate(high), **changes
        )

    def sees(self, directions: np.ndarray) -> np.ndarray:
        """Share of each facet's sample points that see the Sun in the directions given, (f, k), 0 to 1.

        directions : (k, 3) vectors from the body to the Sun, body frame, any length. Whether the facet is turned to
            the Sun is not asked here. Between tabulated meridians the nearer one answers.
        raises : SizeMismatch, if the directions are not three numbers each; ValueError, if one has no length
        """
        from smallbody.light._horizons import _sees

        d = np.atleast_2d(np.asarray(directions, float))
        if d.ndim != 2 or d.shape[1] != 3:
            raise SizeMismatch(f"directions are (k, 3), here {d.shape}")
        length = np.linalg.norm(d, axis=1, keepdims=True)
        if not ((length > 0) & np.isfinite(length)).all():
            bad = int(np.flatnonzero(~((length > 0) & np.isfinite(length)))[0])
            raise ValueError(f"direction {bad} is {d[bad].tolist()}; a direction has a length above zero")
        d = d / length
        out = np.empty((len(self.rows), len(d)))
        turns = np.arctan2(d[:, 1], d[:, 0]) / (2 * np.pi)
        _sees(
            d[:, 2].copy(), turns, self.rows, self.starts, self.low, self.high, self.shifts, self.columns, out
        )  # fmt: skip
        return out


def _meridians(columns: int, shifts: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    longitude = 2 * np.pi * (np.arange(columns) + shifts[:, None]) / columns
    return np.cos(longitude), np.sin(longitude)


def _starts(counts: np.ndarray) -> np.ndarray:
    """Where each meridian's intervals begin, from how many it has, (n,) uint8: (n + 1,)."""
    total = int(counts.sum(dtype=np.int64))
    starts = np.zeros(len(counts) + 1, np.int32 if total < 2**31 else np.int64)
    np.cumsum(counts, out=starts[1:], dtype=starts.dtype)
    return starts


def no_shadows(shape: Shape, columns: int = 64) -> Horizons:
    """The horizons of a body on which nothing casts a shadow but the facet's own plane."""
    none = np.empty(0, np.float32)
    return Horizons(
        columns=columns,
        shifts=np.zeros(1),
        samples=shape.centroids_m[:, None, :],
        rows=np.full(len(shape.facets), -1, np.int32),
        starts=np.zeros(1, np.int32),
        low=none,
        high=none,
    )


def horizons_of(
    shape: Shape, columns: int = 64, lit_samples: int = 4, *, cache: bool = True, meter: Meter = SILENT
) -> Horizons:
    """Tabulate the sky of every facet.

    shape : Shape, closed, facets outward; z is the spin axis
    columns : meridians, one for each rotation node
    lit_samples : 1, 4 or 16 points a facet at which the Sun's visibility is asked
    cache : look in the user's cache folder first, and keep there what took long. SMALLBODY_CACHE names another
        folder; "off" means none
    source : exact for a closed polyhedron: the half-plane of a meridian cuts each facet in a segment, and each segment
        blocks an interval of latitudes (geometry). Candidates come from a bounding-volume tree.
    """
    samples = facet_samples(shape, lit_samples)
    s = samples.shape[1]
    # each sample's meridians stand a little further on: together they sample the sky s times as densely
    shifts = (np.arange(s) + 0.5) / s - 0.5 if s > 1 else np.zeros(1)
    key = hashlib.sha256(f"{shape.sha256} {columns} {lit_samples} {LAYOUT}".encode()).hexdigest()[:32]
    file = _cache_file(key) if cache else None
    if file is not None:
        kept = _from_cache(file, columns, shifts, samples)
        if kept is not None:
            return kept
    began = time.perf_counter()
    table = _tabulate(shape, columns, shifts, samples, meter)
    if file is not None and time.perf_counter() - began > WORTH_KEEPING_S:
        _to_cache(file, table)
    return table


def _tabulate(shape: Shape, columns: int, shifts: np.ndarray, samples: np.ndarray, meter: Meter) -> Horizons:
    from smallbody.light._horizons import MOST, _block_sky, _pack
    from smallbody.light._tree import _build

    f, s = samples.shape[:2]
    corners = np.ascontiguousarray(shape.vertices_m[shape.facets])
    normals = np.ascontiguousarray(shape.normals)
    heights = np.einsum("fi,fi->f", normals, shape.centroids_m)
    order = np.arange(f)
    room = 2 * f + 2
    node_low, node_high = np.empty((room, 3)), np.empty((room, 3))
    node_start, node_end, node_skip = (np.zeros(room, np.int64) for _ in range(3))
    nodes = _build(
        corners.min(1), corners.max(1), shape.centroids_m, order, node_low, node_high, node_start, node_end, node_skip
    )
    slack = SLACK * shape.diameter_m
    cosine, sine = _meridians(columns, shifts)
    done: dict[int, tuple[np.ndarray, np.ndarray, np.ndarray]] = {}

    def work(start: int, end: int) -> None:
        b = end - start
        counts = np.zeros((b, s, columns), np.uint8)
        low = np.empty((b, s, columns, MOST + 2))
        high = np.empty((b, s, columns, MOST + 2))
        found = np.empty(f, np.int64)
        _block_sky(
            start, end, corners, normals, heights, samples, shifts, cosine, sine, slack,
            node_low, node_high, node_start, node_end, node_skip, nodes, order, found, low, high, counts,
        )  # fmt: skip
        ends = np.cumsum(counts, dtype=np.int64).reshape(counts.shape)
        packed_low, packed_high = np.empty(ends[-1, -1, -1], np.float32), np.empty(ends[-1, -1, -1], np.float32)
        _pack(counts, low, high, ends - counts.astype(np.int64), packed_low, packed_high)
        done[start] = counts, packed_low, packed_high

    share(work, f, BLOCK, meter=meter, task="horizons")
    counts = np.concatenate([done[k][0] for k in sorted(done)])
    shadowed = counts.any(axis=(1, 2))
    rows = np.full(f, -1, np.int32)
    rows[shadowed] = np.arange(shadowed.sum(), dtype=np.int32)
    starts = _starts(counts[shadowed].ravel())
    low, high = np.empty(starts[-1], np.float32), np.empty(starts[-1], np.float32)
    at = 0
    for k in sorted(done):
        _, part_low, part_high = done.pop(k)  # let go of, so that the table is not held twice
        low[at : at + len(part_low)], high[at : at + len(part_low)] = part_low, part_high
        at += len(part_low)
    return Horizons(columns=columns, shifts=shifts, samples=samples, rows=rows, starts=starts, low=low, high=high)


def _cache_file(key: str) -> Path | None:
    place = os.environ.get("SMALLBODY_CACHE", "")
    if place == "off":
        return None
    if place:
        return Path(place) / f"horizons-{key}.npz"
    from platformdirs import user_cache_path

    return user_cache_path("smallbody", appauthor=False) / f"horizons-{key}.npz"


def _from_cache(file: Path, columns: int, shifts: np.ndarray, samples: np.ndarray) -> Horizons | None:
    try:
        with open(file, "rb") as opened, np.load(opened, allow_pickle=False) as z:
            rows, counts, low, high = z["rows"], z["counts"], z["low"], z["high"]
        whole = (
            (rows.dtype, counts.dtype, low.dtype, high.dtype) == (np.int32, np.uint8, np.float32, np.float32)
            and rows.shape == (len(samples),)
            and np.array_equal(rows[rows >= 0], np.arange(np.count_nonzero(rows >= 0)))
            and counts.shape == (np.count_nonzero(rows >= 0) * len(shifts) * columns,)
            and low.shape == high.shape == (int(counts.sum(dtype=np.int64)),)
        )
    except (FileNotFoundError, NotADirectoryError, PermissionError):  # if it cannot be written either, that is said
        return None
    except Exception:  # whatever a damaged file makes of the reader: the table is made anew
        whole = False
    if not whole:
        warnings.warn(f"{file}: this cached table of horizons is damaged; it is made anew", Note, stacklevel=3)
        return None
    with suppress(OSError):  # a cache that others keep may be read-only
        os.utime(file)
    return Horizons(columns, shifts, samples, rows, _starts(counts), low, high)


def _to_cache(file: Path, table: Horizons) -> None:
    """Whole or not at all, and two writers do no harm: a temporary file is renamed."""
    counts = np.diff(table.starts).astype(np.uint8)
    try:
        file.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(dir=file.parent, prefix="horizons-", suffix=".part")
        try:
            with os.fdopen(handle, "wb") as out:
                np.savez(out, rows=table.rows, counts=counts, low=table.low, high=table.high)
            os.replace(name, file)
        except BaseException:
            os.unlink(name)
            raise
    except OSError as error:
        warnings.warn(f"horizons are not kept in {file.parent}: {error.strerror or error}", Note, stacklevel=3)
        return
    _trim(file.parent)


def _trim(folder: Path) -> None:
    """Delete the tables used longest ago until the rest fit, and what killed processes left half written."""
    kept = []
    for file in folder.glob("horizons-*"):
        with suppress(OSError):  # another process may be trimming too
            about = file.stat()
            if file.suffix == ".npz":
                kept.append((about.st_mtime, about.st_size, file))
            elif time.time() - about.st_mtime > LEFT_OVER_S:
                file.unlink()
    total = 0
    for _, size, file in sorted(kept, reverse=True):
        total += size
        if total > CACHE_BYTES:
            with suppress(OSError):
                file.unlink(missing_ok=True)
