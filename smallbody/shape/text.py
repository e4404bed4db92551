"""What the readers of text files share: lines and their numbers, messages, numbers, and the splitting of polygons."""

from __future__ import annotations

import math
import re
import warnings
from collections.abc import Iterator

import numpy as np

from smallbody.errors import Note, ShapeError
from smallbody.shape.model import Shape, Source

_PLAIN = re.compile(rb"[0-9eE+\-. \t\r\n]*")
_WHOLE = re.compile(rb"[0-9 \t\n]*")
LARGEST = 10**9  # no index and no count is larger; keeps a mistyped one from overflowing
MOST_CORNERS = 10_000  # of one polygon
NOT_FLAT = 1e-3  # corners out of the mean plane by more than this part of the polygon's size deserve a note


class Lines:
    """The lines of a text file, any line ending, and errors that name file and line.

    raises : ShapeError, for an empty file and for one that is not text
    """

    def __init__(self, data: bytes, name: str) -> None:
        self.name = name
        if not data.strip():
            raise self.error(None, "is empty")
        if data.startswith(b"\xef\xbb\xbf"):
            data = data[3:]
        if b"\r" in data:
            data = data.replace(b"\r\n", b"\n").replace(b"\r", b"\n")
        self.data = data = data.rstrip(b"\x1a")
        self.lines = data.split(b"\n")
        bad = re.search(rb"[\x00-\x08\x0e-\x1f\x7f]", data)
        if bad:
            number = data.count(b"\n", 0, bad.start()) + 1
            raise self.error(number, f"is not text: byte 0x{bad.group()[0]:02x}")

    def error(self, line: int | None, text: str) -> ShapeError:
        """An error to raise; line is 1-based, or None for the whole file."""
        return ShapeError(f"{self.name}, line {line}: {text}" if line is not None else f"{self.name} {text}", line=line)

    @staticmethod
    def show(word: bytes) -> str:
        """A word of the file for a message: short, printable."""
        text = word.decode("ascii", "replace")
        text = "".join(c if c.isprintable() else "?" for c in text)
        return repr(text if len(text) <= 24 else text[:21] + "...")

    def statements(self) -> Iterator[tuple[int, bytes]]:
        """Line numbers and lines, those that end in a backslash joined to the next."""
        pending: list[bytes] = []
        started = 0
        for number, line in enumerate(self.lines, start=1):
            if line.endswith(b"\\"):
                pending.append(line[:-1])
                started = started or number
            elif pending:
                yield started, b" ".join([*pending, line])
                pending, started = [], 0
            else:
                yield number, line
        if pending:
            yield started, b" ".join(pending)


def finite_number(lines: Lines, number: int, word: bytes, what: str, fortran: bool = True) -> float:
    """The number in a word of a line; with `fortran`, exponents may be written with a D."""
    try:
        if b"_" in word:
            raise ValueError
        value = float(word.replace(b"D", b"E").replace(b"d", b"e") if fortran and word[-1:].isdigit() else word)
    except ValueError:
        raise lines.error(number, f"{what} {lines.show(word)} is not a number") from None
    if not math.isfinite(value):
        raise lines.error(number, f"{what} {lines.show(word)} is not finite")
    if abs(value) > 1e30:
        raise lines.error(number, f"{what} {lines.show(word)} is out of any body's range")
    return value


def whole_number(lines: Lines, number: int, word: bytes, what: str) -> int:
    """The whole number, 0 or more, in a word of a line."""
    digits = word[1:] if word[:1] == b"+" else word
    if not digits.isdigit():
        raise lines.error(number, f"{what} {lines.show(word)} is not a whole number")
    if len(digits) > 18 or int(digits) > LARGEST:
        raise lines.error(number, f"{what} {lines.show(word)} is too large for any shape")
    return int(digits)


def index_number(lines: Lines, number: int, word: bytes, shown: bytes = b"") -> int:
    """A corner's vertex number, perhaps negative, in a word of a line; `shown` is what messages call it."""
    shown = shown or word
    digits = word[1:] if word[:1] in (b"-", b"+") else word
    if not digits.isdigit():
        raise lines.error(number, f"corner {lines.show(shown)} is not a vertex number")
    if len(digits) > 18 or int(digits) > LARGEST:
        raise lines.error(number, f"corner {lines.show(shown)} is larger than any vertex number")
    return -int(digits) if word[:1] == b"-" else int(digits)


def quick_whole_numbers(rows: list[bytes], columns: int) -> np.ndarray | None:
    """(len(rows), columns) int64 when every row holds exactly that many plain whole numbers; else None."""
    joined = b" \n".join(rows)
    if _WHOLE.fullmatch(joined) is None or any(len(row.split()) != columns for row in rows):
        return None
    words = np.array(joined.split(), dtype=np.bytes_)
    if words.dtype.itemsize > 10:
        return None
    return words.astype(np.int64).reshape(len(rows), columns)


def quick_numbers(rows: list[bytes], columns: int) -> np.ndarray | None:
    """(len(rows), columns) float64 when every row holds exactly that many plain finite numbers; else None."""
    joined = b" \n".join(rows)
    if _PLAIN.fullmatch(joined) is None:
        return None
    try:
        if any(len(row.split()) != columns for row in rows):
            return None
        values = np.array(joined.split(), dtype=np.bytes_).astype(np.float64)
    except ValueError:
        return None
    if values.size != len(rows) * columns or not (np.abs(values) <= 1e30).all():
        return None
    return values.reshape(len(rows), columns)


def assemble(
    lines: Lines,
    vertices: np.ndarray,
    vertex_lines: np.ndarray,
    corners: np.ndarray,
    counts: np.ndarray,
    facet_lines: np.ndarray,
) -> Shape:
    """A shape of triangles from polygons.

    vertices : (v, 3)
    corners : vertex numbers, 0-based and in range, polygon after polygon
    counts : (p,) corners of each polygon, at least 3
    vertex_lines, facet_lines : (v,) and (p,) lines of the file
    warns : Note, where polygons are not flat
    """
    if (counts == 3).all():
        facets, polygon = corners.reshape(-1, 3), np.arange(len(counts))
    else:
        facets, polygon, bent = split_polygons(lines, vertices, corners, counts, facet_lines)
        if bent.size:
            said = "1 polygon is" if bent.size == 1 else f"{bent.size:,} polygons are"
            warnings.warn(
                f"{lines.name}: {said} not flat (the first: facet {bent[0] + 1}, line {facet_lines[bent[0]]}) "
                "and had to be split into triangles one way of several",
                Note,
                stacklevel=4,
            )
    return Shape(vertices, facets, Source(lines.name, polygon + 1, facet_lines[polygon], vertex_lines))


def split_polygons(
    lines: Lines, vertices: np.ndarray, corners: np.ndarray, counts: np.ndarray, facet_lines: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Triangles (t, 3), the polygon of each (t,), and the polygons that are not flat."""
    start = np.concatenate([[0], np.cumsum(counts)[:-1]])
    triangles: list[np.ndarray] = []
    owners: list[np.ndarray] = []
    bent: list[np.ndarray] = []

    plain = np.flatnonzero(counts == 3)
    triangles.append(corners[start[plain][:, None] + np.arange(3)])
    owners.append(plain)

    quads = np.flatnonzero(counts == 4)
    if quads.size:
        q = corners[start[quads][:, None] + np.arange(4)]
        t, uneven = _split_quads(vertices, q)
        triangles.append(t.reshape(-1, 3))
        owners.append(np.repeat(quads, 2))
        bent.append(quads[uneven])

    for p in np.flatnonzero(counts > 4):
        if counts[p] > MOST_CORNERS:
            raise lines.error(
                int(facet_lines[p]), f"a facet of {counts[p]:,} corners; at most {MOST_CORNERS:,} are read"
            )
        ring = corners[start[p] : start[p] + counts[p]]
        cut, uneven_ring = clip_ears(vertices[ring])
        triangles.append(ring[cut])
        owners.append(np.full(len(cut), p))
        if uneven_ring:
            bent.append(np.array([p]))

    facets, polygon = np.concatenate(triangles), np.concatenate(owners)
    order = np.argsort(polygon, kind="stable")
    return facets[order], polygon[order], np.sort(np.concatenate(bent)) if bent else np.zeros(0, dtype=int)


def _split_quads(vertices: np.ndarray, quads: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """(q, 2, 3) triangles and (q,) whether the four corners are out of plane.

    The shorter diagonal, unless the other one alone keeps both triangles on the same side (a quad with a notch).
    """
    p = vertices[quads]
    scale = np.ptp(p, axis=1).max(axis=1)
    p = (p - p[:, :1]) / np.where(scale > 0.0, scale, 1.0)[:, None, None]
    a, b, c, d = (p[:, k] for k in range(4))

    def agree(one: np.ndarray, two: np.ndarray) -> np.ndarray:
        return np.asarray(np.einsum("ij,ij->i", one, two) > 0.0)

    ac_good = agree(np.cross(b - a, c - a), np.cross(c - a, d - a))
    bd_good = agree(np.cross(b - a, d - a), np.cross(c - b, d - b))
    shorter_ac = ((c - a) ** 2).sum(axis=1) <= ((d - b) ** 2).sum(axis=1)
    by_ac = np.where(ac_good == bd_good, shorter_ac, ac_good)
    along_ac = quads[:, [[0, 1, 2], [0, 2, 3]]]
    along_bd = quads[:, [[0, 1, 3], [1, 2, 3]]]
    normal = np.cross(c - a, d - b)
    length = np.sqrt((normal**2).sum(axis=1))
    gap = np.abs(np.einsum("ij,ij->i", b - a, normal)) / np.where(length > 0.0, length, 1.0)
    return np.where(by_ac[:, None, None], along_ac, along_bd), gap > NOT_FLAT


def clip_ears(ring: np.ndarray) -> tuple[np.ndarray, bool]:
    """Triangles (n - 2, 3) of a polygon's corner numbers, and whether the polygon is out of plane.

    ring : (n, 3) corners in order
    source : ear clipping (G. H. Meisters 1975, Am. Math. Monthly 82, 648) in the plane of Newell's mean normal
    """
    n = len(ring)
    scale = float(np.ptp(ring, axis=0).max()) or 1.0
    p = (ring - ring.mean(axis=0)) / scale
    normal = np.cross(p, np.roll(p, -1, axis=0)).sum(axis=0)
    length = math.sqrt(float(normal @ normal))
    if length < 1e-12:  # no plane to speak of: a fan is as good as anything
        return np.array([(0, k, k + 1) for k in range(1, n - 1)]), True
    normal /= length
    bent = bool(np.abs(p @ normal).max() > NOT_FLAT)
    side = np.cross(normal, np.eye(3)[int(np.abs(normal).argmin())])
    side /= math.sqrt(float(side @ side))
    flat = np.stack([p @ side, p @ np.cross(normal, side)], axis=1)

    left = list(range(n))
    out: list[tuple[int, int, int]] = []
    while len(left) > 3:
        index = np.array(left)
        before, at, after = flat[np.roll(index, 1)], flat[index], flat[np.roll(index, -1)]
        turn = _cross2(at - before, after - at)
        ear = next(
            (int(k) for k in np.argsort(-turn, kind="stable") if turn[k] > 0.0 and _is_ear(flat, index, int(k))), 0
        )
        out.append((left[ear - 1], left[ear], left[(ear + 1) % len(left)]))
        del left[ear]
    out.append((left[0], left[1], left[2]))
    return np.array(out), bent


def _cross2(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return np.asarray(a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0])


def _is_ear(flat: np.ndarray, index: np.ndarray, k: int) -> bool:
    m = len(index)
    a, b, c = flat[index[k - 1]], flat[index[k]], flat[index[(k + 1) % m]]
    others = flat[np.delete(index, [(k - 1) % m, k, (k + 1) % m])]
    inside = (_cross2(b - a, others - a) >= 0) & (_cross2(c - b, others - b) >= 0) & (_cross2(a - c, others - c) >= 0)
    return not bool(inside.any())
