"""A closed surface of triangles and what follows from it alone: normals, areas, volume, centre, moments."""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Any

import numpy as np

from smallbody.errors import ShapeError, SizeMismatch


@dataclass(frozen=True, eq=False)
class MassProperties:
    """Mass properties of the solid inside a closed surface, for unit density.

    volume_m3 : m3; negative when the facets are turned inwards
    centre_m : (3,) centre of mass, m
    inertia_m5 : (3, 3) inertia tensor about the centre, m5 (times density: kg m2)
    moments_m5 : (3,) principal moments, ascending, m5
    axes : (3, 3) rows are the principal axes, right-handed; row i belongs to moments_m5[i]
    """

    volume_m3: float
    centre_m: np.ndarray
    inertia_m5: np.ndarray
    moments_m5: np.ndarray
    axes: np.ndarray


@dataclass(frozen=True, eq=False)
class Source:
    """Where a shape was read, so that a fault can be found again in the file.

    name : the file's name
    facet_numbers : (f,) 1-based number in the file of the facet that each triangle comes from
    facet_lines : (f,) 1-based line of that facet, or None where the format has no lines
    vertex_lines : (v,) 1-based line of each vertex, or None
    """

    name: str
    facet_numbers: np.ndarray | None = None
    facet_lines: np.ndarray | None = None
    vertex_lines: np.ndarray | None = None


@dataclass(frozen=True)
class Made:
    """The call that made a shape, kept so that the same body can be made again with other facets.

    kind, facets, seed, numbers : arguments of `make_shape`
    frame : 3x3 matrix (rows) that took the maker's vertices to the present frame, shifts left out
    """

    kind: str
    facets: int
    seed: int
    numbers: dict[str, Any] = field(default_factory=dict)
    frame: tuple[tuple[float, float, float], ...] = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))


def _frozen(a: np.ndarray) -> np.ndarray:
    a.flags.writeable = False
    return a


@dataclass(frozen=True, eq=False)
class Shape:
    """A surface of triangles.

    vertices_m : (v, 3) float64, m
    facets : (f, 3) int64, corners of each facet, 0-based, counter-clockwise seen from outside
    source : where it was read, if it was
    made : how it was made, if it was
    raises : SizeMismatch, if the arrays are not of those shapes; ShapeError, if a corner names no vertex

    The arrays are copied and read-only. Whether the surface is closed and usable is asked of `check_shape`.

    >>> corner = Shape([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], [[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> round(6 * corner.mass.volume_m3, 12)
    1.0
    """

    vertices_m: np.ndarray
    facets: np.ndarray
    source: Source | None = None
    made: Made | None = None

    def __post_init__(self) -> None:
        v = np.array(self.vertices_m, dtype=np.float64, order="C")
        f = np.array(self.facets, order="C")
        if v.ndim != 2 or v.shape[1] != 3 or f.ndim != 2 or f.shape[1] != 3:
            raise SizeMismatch(
                f"a shape takes (v, 3) vertices and (f, 3) facets, not {tuple(v.shape)} and {tuple(f.shape)}"
            )
        if f.dtype.kind not in "iu":
            raise ShapeError(f"facets are vertex numbers, whole numbers, not {f.dtype}")
        bad = np.flatnonzero(((f < 0) | (f >= len(v))).any(axis=1))
        if bad.size:
            raise ShapeError(
                f"facet {bad[0] + 1} has corners {f[bad[0]].tolist()}; there are vertices 0 to {len(v) - 1}",
                facets=bad,
            )
        object.__setattr__(self, "vertices_m", _frozen(v))
        object.__setattr__(self, "facets", _frozen(f.astype(np.int64)))

    def __repr__(self) -> str:
        return f"Shape({len(self.vertices_m)} vertices, {len(self.facets)} facets)"

    @cached_property
    def _doubled_m2(self) -> np.ndarray:
        """(f, 3) cross product of two edges: normal times twice the area, m2."""
        a, b, c = (self.vertices_m[self.facets[:, k]] for k in range(3))
        return _frozen(np.cross(b - a, c - a))

    @cached_property
    def areas_m2(self) -> np.ndarray:
        """(f,) m2."""
        return _frozen(0.5 * np.sqrt((self._doubled_m2**2).sum(axis=1)))

    @cached_property
    def normals(self) -> np.ndarray:
        """(f, 3) outward unit vectors; NaN for a facet without area."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return _frozen(self._doubled_m2 / (2.0 * self.areas_m2[:, None]))

    @cached_property
    def centroids_m(self) -> np.ndarray:
        """(f, 3) m."""
        return _frozen(self.vertices_m[self.facets].mean(axis=1))

    @cached_property
    def mass(self) -> MassProperties:
        """Exact for the polyhedron; see `mass_properties`."""
        return mass_properties(self.vertices_m, self.facets)

    @cached_property
    def sha256(self) -> str:
        """Hex digest of the bytes of vertices (little-endian float64) and facets (little-endian int64)."""
        digest = hashlib.sha256(self.vertices_m.astype("<f8").tobytes())
        digest.update(self.facets.astype("<i8").tobytes())
        return digest.hexdigest()

    @cached_property
    def extents_m(self) -> np.ndarray:
        """(3,) size of the box along x, y, z around the vertices in use, m."""
        return _frozen(np.ptp(self.vertices_m[np.unique(self.facets)], axis=0))

    @cached_property
    def diameter_m(self) -> float:
        """Diameter of the sphere of the same volume, m."""
        return float(np.cbrt(6.0 * self.mass.volume_m3 / math.pi))

    def scaled(self, k: float) -> Shape:
        """All lengths times k > 0, about the origin."""
        if not (math.isfinite(k) and k > 0):
            raise ShapeError(f"a shape is scaled by a positive number, not {k!r}")
        return self._mapped(k * np.eye(3))

    def turned(self, rotation: np.ndarray) -> Shape:
        """Every vertex v becomes rotation @ v; rotation is (3, 3), orthogonal, with determinant +1."""
        turn = np.asarray(rotation, dtype=np.float64)
        if turn.shape != (3, 3) or not np.allclose(turn @ turn.T, np.eye(3), atol=1e-9) or np.linalg.det(turn) < 0:
            raise ShapeError("a shape is turned by a 3x3 rotation matrix (orthogonal, determinant +1)")
        return self._mapped(turn)

    def moved(self, d_m: np.ndarray) -> Shape:
        """Every vertex shifted by d_m, (3,) m."""
        return replace(self, vertices_m=self.vertices_m + np.asarray(d_m, dtype=np.float64))

    def mirrored(self) -> Shape:
        """The mirror image, x to -x, facets still outward."""
        return self._mapped(np.diag([-1.0, 1.0, 1.0]))

    def _mapped(self, matrix: np.ndarray) -> Shape:
        made = self.made
        if made is not None:
            made = replace(made, frame=tuple(map(tuple, (matrix @ np.array(made.frame)).tolist())))
        facets = self.facets if np.linalg.det(matrix) > 0 else self.facets[:, ::-1]
        return replace(self, vertices_m=self.vertices_m @ matrix.T, facets=facets, made=made)

    def halved(self) -> Shape:
        """The same body with about half the facets, with the same volume and centre of mass.

        Made again where the maker is known, else thinned by quadric decimation (Garland & Heckbert 1997).
        raises : ShapeError, if half the facets make no usable shape
        """
        from smallbody.shape.halve import halved

        return halved(self)


def mass_properties(vertices_m: np.ndarray, facets: np.ndarray) -> MassProperties:
    """Volume, centre, inertia and principal axes of the solid inside a closed surface, exact for the polyhedron.

    vertices_m : (v, 3) m
    facets : (f, 3) vertex numbers, outward
    source : signed tetrahedra from one point to every facet, each with its exact second moments
        (F. Tonon 2004, J. Math. Stat. 1, 8; the same integrals as B. Mirtich 1996, J. Graphics Tools 1, 31)

    The common point is the mean vertex, so that a body far from the origin loses no digits.
    """
    origin = vertices_m.mean(axis=0) if len(vertices_m) else np.zeros(3)
    v = vertices_m - origin
    a, b, c = (v[facets[:, k]] for k in range(3))
    six_volumes = np.einsum("ij,ij->i", a, np.cross(b, c))
    volume = float(six_volumes.sum() / 6.0)
    corner_sum = a + b + c
    first = six_volumes @ corner_sum / 24.0
    # integral of x x^T over a tetrahedron with one corner at 0: volume/20 times the sum of the corners' and their sum's
    second = sum(np.einsum("i,ij,ik->jk", six_volumes, p, p) for p in (a, b, c, corner_sum)) / 120.0
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        centre = first / volume
        second = second - volume * np.outer(centre, centre)
    inertia = np.trace(second) * np.eye(3) - second
    inertia = 0.5 * (inertia + inertia.T)
    if np.isfinite(inertia).all():
        moments, columns = np.linalg.eigh(inertia)
        axes = _orderly(moments, columns.T)
    else:
        moments, axes = np.full(3, np.nan), np.full((3, 3), np.nan)
    return MassProperties(volume, _frozen(centre + origin), _frozen(inertia), _frozen(moments), _frozen(axes))


def _orderly(moments: np.ndarray, axes: np.ndarray) -> np.ndarray:
    """Rows with fixed signs, right-handed: the last points to +z, the first to +x (to +y, +z where those vanish).

    Where moments agree to 1e-9 any axes between theirs would do: those nearest to z and x are taken, so that rounding
    turns nothing.
    """
    x, _, z = np.eye(3)

    def across(wanted: np.ndarray, square_to: np.ndarray) -> np.ndarray:
        for start in (wanted, *np.eye(3)):
            part = start - (start @ square_to) * square_to
            if part @ part > 0.25:
                return np.asarray(part / np.sqrt(part @ part))
        raise AssertionError("one of three axes is far from any direction")

    def towards(row: np.ndarray, order: tuple[int, ...]) -> np.ndarray:
        for k in order:
            if abs(row[k]) > 1e-12:
                return row if row[k] > 0 else -row
        return row

    low_pair, high_pair = (np.diff(moments) < 1e-9 * moments[2]).tolist()
    if low_pair and high_pair:
        return np.eye(3)
    first, last = towards(axes[0], (0, 1, 2)), towards(axes[2], (2, 0, 1))
    if low_pair:
        first = across(x, last)
    elif high_pair:
        last = across(z, first)
    return np.array([first, np.cross(last, first), last])
