"""What sunlight the facets of a rotating body receive at places round its orbit."""

from __future__ import annotations

import threading
from dataclasses import dataclass

import numpy as np

from smallbody.light.horizons import Horizons
from smallbody.light.sun import SunOnBody
from smallbody.shape import Shape
from smallbody.workers import SILENT, Meter, share

BLOCK = 128


@dataclass(frozen=True)
class LightSums:
    """Sums over the surface of means over a rotation, for unit sunlight, in the frame in which the Sun has no y.

    mu is the cosine of the Sun's zenith distance where a facet sees the Sun, else 0.
    lambert : (p, 3) m2, sum of dA <mu n>: times -(2/3) S/c it is the force of light given back by Lambert's law
    lever : (p, 3) m3, sum of dA <mu r x n>: the same for the torque
    across : (p,) m2, sum of dA <mu>: the lit cross-section
    lit_lever : (p, 3) m3, sum of dA <mu r> over lit points: its cross product with the Sun's direction is the torque of
        the light that arrives
    mean_cosine : (f,) mean of <mu> over the places, with their weights, with all meridians and samples
    """

    lambert: np.ndarray
    lever: np.ndarray
    across: np.ndarray
    lit_lever: np.ndarray
    mean_cosine: np.ndarray

    def every_second_place(self) -> LightSums:
        """The sums at places 0, 2, 4, ...: equal steps of true anomaly stay equal steps."""
        return LightSums(self.lambert[::2], self.lever[::2], self.across[::2], self.lit_lever[::2], self.mean_cosine)


@dataclass(frozen=True)
class LightTable:
    """The sums at all places, and what coarser tables of the sky would have made of them."""

    fine: LightSums
    fewer_meridians: LightSums  # every second one
    fewer_samples: LightSums  # every fourth one


def light_sums(
    shape: Shape, horizons: Horizons, sun: SunOnBody, weight: np.ndarray, *, meter: Meter = SILENT
) -> LightTable:
    """Sum the light over the surface at every place.

    weight : (p,) of the places, for mean_cosine
    source : the means over a rotation of an unobstructed facet are integrated exactly (geometry); what is blocked is
        taken away at the sample points and meridians of the horizons
    """
    from smallbody.light._sunlight import _light_sums

    p, f = len(sun.sin_latitude), len(shape.facets)
    total = [np.zeros((3, p, 3)), np.zeros((3, p, 3)), np.zeros((3, p)), np.zeros((3, p, 3))]
    mean_cosine = np.empty(f)
    by_latitude, ranked, cells = sun.ranks
    cosine, sine = horizons.meridians
    parts: dict[int, list[np.ndarray]] = {}
    lock = threading.Lock()

    def work(start: int, end: int) -> None:
        part = [np.zeros_like(t) for t in total]
        _light_sums(
            start, end, shape.normals, shape.areas_m2, shape.centroids_m, horizons.samples, horizons.rows,
            horizons.starts, horizons.low, horizons.high, cosine, sine,
            sun.sin_latitude, sun.cos_latitude, by_latitude, ranked, cells, weight,
            part[0], part[1], part[2], part[3], mean_cosine,
        )  # fmt: skip
        with lock:
            parts[start] = part

    share(work, f, BLOCK, meter=meter, task="light")
    for start in sorted(parts):  # always in the same order, so that sums are the same to the last bit
        for t, part in zip(total, parts[start]):
            t += part
    lambert, lever, across, lit_lever = total
    fine, meridians, samples = (LightSums(lambert[v], lever[v], across[v], lit_lever[v], mean_cosine) for v in range(3))
    return LightTable(fine, meridians, samples)


def lit_cosines(shape: Shape, horizons: Horizons, sun: SunOnBody, facets: np.ndarray) -> np.ndarray:
    """mu of some facets at every place and rotation node in the order of time, (p, columns, L).

    facets : (L,) indices. The Sun's body longitude falls by 2 pi/columns from node to node, from 0 at the first.
    """
    from smallbody.light._sunlight import _lit

    p = len(sun.sin_latitude)
    by_latitude, ranked, cells = sun.ranks
    cosine, sine = horizons.meridians
    out = np.empty((p, horizons.columns, len(facets)))
    _lit(
        facets, shape.normals, horizons.rows, horizons.starts, horizons.low, horizons.high, cosine, sine,
        sun.sin_latitude, sun.cos_latitude, by_latitude, ranked, cells, np.empty((horizons.columns, p)), out,
    )  # fmt: skip
    return out


def lit_latitudes(sun: SunOnBody, latitude: np.ndarray, columns: int) -> np.ndarray:
    """The same under an open sky for normals at the given latitudes and longitude 0, (p, columns, L)."""
    turn = 2 * np.pi * np.arange(columns) / columns
    slant = sun.cos_latitude[:, None, None] * np.cos(latitude) * np.cos(turn)[:, None]
    return np.maximum(0.0, slant + sun.sin_latitude[:, None, None] * np.sin(latitude))
