"""STL and PLY through trimesh, with our own look at the content first.

A file that is cut short or announces more than it holds is refused before any of its counts is trusted.
"""

from __future__ import annotations

import io
import re
import warnings
from typing import Any

import numpy as np

from smallbody.errors import ShapeError
from smallbody.shape.model import Shape, Source
from smallbody.shape.text import Lines, finite_number, index_number, whole_number

_STL_HEAD, _STL_FACET = 84, 50  # bytes
_PLY_SIZES = {
    "char": 1, "int8": 1, "uchar": 1, "uint8": 1, "short": 2, "int16": 2, "ushort": 2, "uint16": 2,
    "int": 4, "int32": 4, "uint": 4, "uint32": 4, "float": 4, "float32": 4, "double": 8, "float64": 8,
}  # fmt: skip
_LIST_NAMES = ("vertex_indices", "vertex_index")
LONGEST_HEAD = 65_536  # bytes of a PLY header


def looks_like_stl(data: bytes) -> bool:
    """Whether the content, not the name, says STL."""
    return _is_binary_stl(data) or data[:512].lstrip().lower().startswith(b"solid")


def parse_stl(data: bytes, name: str) -> Shape:
    """The surface in an STL file, binary or text; corners at exactly the same place are one vertex.

    raises : ShapeError, with file and, for text, line
    """
    if not data:
        raise ShapeError(f"{name} is empty")
    facet_lines = None
    if not _is_binary_stl(data):
        if not data.lstrip().lower().startswith(b"solid"):
            if len(data) < _STL_HEAD:
                raise ShapeError(
                    f"{name} is no STL file: neither text that begins with solid nor {_STL_HEAD} bytes of head"
                )
            announced = int.from_bytes(data[80:84], "little")
            raise ShapeError(
                f"{name} announces {announced:,} facets, {_STL_HEAD + _STL_FACET * announced:,} bytes of binary STL; "
                f"it has {len(data):,} (is the file cut short?)"
            )
        data, facet_lines = _check_stl_text(Lines(data, name))
    vertices, facets = _load(data, name, "stl")
    if not len(facets):
        raise ShapeError(f"{name} holds no facets")
    _all_finite(name, vertices)
    where, number = _merged(vertices)
    numbers = np.arange(1, len(facets) + 1)
    return Shape(vertices[where], number[facets], Source(name, numbers, facet_lines))


def _is_binary_stl(data: bytes) -> bool:
    return len(data) >= _STL_HEAD and len(data) == _STL_HEAD + _STL_FACET * int.from_bytes(data[80:84], "little")


def _merged(points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Numbers of the points that are kept, in order, and for every point its number among those."""
    rows = np.ascontiguousarray(points + 0.0)  # -0 becomes 0
    order = np.lexsort((rows[:, 2], rows[:, 1], rows[:, 0]))
    new = np.concatenate([[True], (rows[order[1:]] != rows[order[:-1]]).any(axis=1)])
    group = np.cumsum(new) - 1
    first = np.minimum.reduceat(order, np.flatnonzero(new))
    rank = np.empty(len(first), dtype=np.int64)
    rank[np.argsort(first)] = np.arange(len(first))
    number = np.empty(len(points), dtype=np.int64)
    number[order] = rank[group]
    return np.sort(first), number


_STL_GRAMMAR = (
    (b"facet", b"normal"), (b"outer", b"loop"), (b"vertex",), (b"vertex",), (b"vertex",), (b"endloop",), (b"endfacet",)
)  # fmt: skip


def _check_stl_text(lines: Lines) -> tuple[bytes, np.ndarray]:
    """A plain copy of a text STL that has each statement where it belongs, and the lines of its facets.

    raises : ShapeError
    """
    facets, plain = [], [b"solid"]
    expected, closed = 0, True
    for number, line in enumerate(lines.lines, start=1):
        words = line.lower().split()
        if not words:
            continue
        if words[0] == b"solid" and expected == 0 and closed:
            closed = False
        elif words[0] == b"endsolid" and expected == 0 and not closed:
            closed = True
        else:
            due = _STL_GRAMMAR[expected]
            if closed or tuple(words[: len(due)]) != due:
                wanted = b"solid" if closed else b" ".join(due)
                raise lines.error(number, f"{lines.show(words[0])} where {wanted.decode()} is due")
            if expected == 0:
                facets.append(number)
            if due == (b"vertex",):
                if len(words) != 4:
                    raise lines.error(number, f"a vertex takes three coordinates, here are {len(words) - 1}")
                for word in words[1:]:
                    finite_number(lines, number, word, "coordinate", fortran=False)
            plain.append(b" ".join(words if due == (b"vertex",) else due) + (b" 0 0 0" if expected == 0 else b""))
            expected = (expected + 1) % len(_STL_GRAMMAR)
    if not closed:
        raise lines.error(len(lines.lines), "the file ends before endsolid (is it cut short?)")
    if not facets:
        raise lines.error(None, "holds no facets")
    return b"\n".join([*plain, b"endsolid", b""]), np.array(facets)


def parse_ply(data: bytes, name: str) -> Shape:
    """The surface in a PLY file, text or binary; facets of three or of four corners.

    raises : ShapeError, with file and, for text, line
    """
    if not data.strip():
        raise ShapeError(f"{name} is empty")
    head = _PlyHead(data, name)
    vertex_lines = facet_lines = None
    if head.text:
        body, vertex_lines, facet_lines, corners = _check_ply_text(head, data)
    else:
        body, corners = data[head.size :], _check_ply_binary(head, data)
    vertices, facets = _load(head.plain() + body, name, "ply")
    if len(vertices) != head.n_vertices or len(facets) != head.n_facets * (corners - 2):
        raise ShapeError(
            f"{name} announces {head.n_vertices:,} vertices and {head.n_facets:,} facets; "
            f"{len(vertices):,} and {len(facets):,} were found"
        )
    _all_finite(name, vertices)
    polygon = np.repeat(np.arange(head.n_facets), corners - 2)
    wrong = np.flatnonzero(((facets < 0) | (facets >= len(vertices))).any(axis=1))
    if wrong.size:
        at = int(polygon[wrong[0]])
        line = f", line {facet_lines[at]}" if facet_lines is not None else ""
        raise ShapeError(
            f"{name}{line}: facet {at + 1} has corners {facets[wrong[0]].tolist()}; "
            f"vertices are 0 to {len(vertices) - 1:,}"
        )
    source = Source(name, polygon + 1, None if facet_lines is None else facet_lines[polygon], vertex_lines)
    return Shape(vertices, facets, source)


class _PlyHead:
    """The header of a PLY file, understood as far as triangles need it."""

    def __init__(self, data: bytes, name: str) -> None:
        end = re.search(rb"^end_header[ \t]*(\r\n|\r|\n)", data[:LONGEST_HEAD], re.MULTILINE)
        if not data.startswith(b"ply") or end is None:
            fault = "does not begin with ply" if not data.startswith(b"ply") else "has no line end_header"
            raise ShapeError(f"{name} is no PLY file: it {fault}")
        self.name, self.size = name, end.end()
        self.lines = Lines(data[: end.start()], name)
        self.elements: list[tuple[str, int, list[list[str]]]] = []
        self.format = ""
        for number, line in enumerate(self.lines.lines, start=1):
            self._statement(number, line.split())
        self.n_lines = len(self.lines.lines)  # end_header's own, since the text before it ends in a line end
        if self.format not in ("ascii", "binary_little_endian", "binary_big_endian"):
            raise self.lines.error(None, "is no PLY file: its format is not ascii or binary")
        self.text = self.format == "ascii"
        if [e[0] for e in self.elements[:2]] != ["vertex", "face"]:
            raise self.lines.error(
                None, "should announce the elements vertex and face, in this order, before any others"
            )
        (_, self.n_vertices, self.vertex), (_, self.n_facets, self.face) = self.elements[:2]
        if len(self.elements) > 2 and any(count for _, count, _ in self.elements[2:]):
            raise self.lines.error(None, f"has elements besides vertex and face: {self.elements[2][0]!r}")
        names = [p[-1] for p in self.vertex]
        if not {"x", "y", "z"} <= set(names) or any(p[0] == "list" for p in self.vertex):
            raise self.lines.error(None, "should give every vertex the properties x, y, z, and no lists")
        lists = [k for k, p in enumerate(self.face) if p[0] == "list"]
        if len(lists) != 1 or self.face[lists[0]][-1] not in _LIST_NAMES:
            raise self.lines.error(None, "should give every face one list, vertex_indices")
        self.list_at = lists[0]
        if any(kind.startswith(("float", "double")) for kind in self.face[lists[0]][1:3]):
            raise self.lines.error(None, "should give vertex_indices as whole numbers")
        if self.n_vertices < 4 or self.n_facets < 4:
            raise self.lines.error(
                None,
                f"announces {self.n_vertices:,} vertices and {self.n_facets:,} facets; a closed surface has 4 and 4",
            )

    def plain(self) -> bytes:
        """The header again, without comments and blank lines."""
        text = ["ply", f"format {self.format} 1.0"]
        for name, count, properties in self.elements:
            text.append(f"element {name} {count}")
            text += [f"property {' '.join(p)}" for p in properties]
        return "\n".join([*text, "end_header", ""]).encode("ascii", "replace")

    def _statement(self, number: int, words: list[bytes]) -> None:
        if not words or words[0] in (b"comment", b"obj_info") or (number == 1 and words == [b"ply"]):
            return
        text = [w.decode("ascii", "replace") for w in words]
        if words[0] == b"format" and len(words) == 3:
            self.format = text[1]
        elif words[0] == b"element" and len(words) == 3:
            if text[1] in (e[0] for e in self.elements):
                raise self.lines.error(number, f"the element {self.lines.show(words[1])} is announced twice")
            self.elements.append((text[1], whole_number(self.lines, number, words[2], f"count of {text[1][:20]}"), []))
        elif words[0] == b"property" and self.elements and len(words) == (5 if words[1:2] == [b"list"] else 3):
            kinds: list[str] = text[2:4] if text[1] == "list" else text[1:2]
            for kind in kinds:
                if kind not in _PLY_SIZES:
                    raise self.lines.error(number, f"{self.lines.show(kind.encode())} is no type of PLY")
            if text[-1] in (p[-1] for p in self.elements[-1][2]):
                raise self.lines.error(number, f"the property {self.lines.show(words[-1])} is announced twice")
            self.elements[-1][2].append(text[1:])
        else:
            raise self.lines.error(number, f"{self.lines.show(b' '.join(words))} is no statement of a PLY header")


def _check_ply_text(head: _PlyHead, data: bytes) -> tuple[bytes, np.ndarray, np.ndarray, int]:
    """The rows of a text PLY that are as announced, the lines of vertices and of facets, and corners per facet."""
    lines = Lines(data, head.name)
    body = enumerate(lines.lines[head.n_lines :], start=head.n_lines + 1)
    rows = [(n, line) for n, line in body if line.strip()]
    total = head.n_vertices + head.n_facets
    if len(rows) != total:
        fault = "only " if len(rows) < total else ""
        raise lines.error(
            None,
            f"announces {head.n_vertices:,} vertices and {head.n_facets:,} facets; {fault}{len(rows):,} lines follow"
            + (" (is the file cut short?)" if fault else ""),
        )
    for number, line in rows[: head.n_vertices]:
        words = line.split()
        if len(words) != len(head.vertex):
            raise lines.error(number, f"a vertex takes {len(head.vertex)} numbers here, there are {len(words)}")
        for word in words:
            finite_number(lines, number, word, "number", fortran=False)
    size = 0
    for number, line in rows[head.n_vertices :]:
        words = line.split()
        corners = (
            whole_number(lines, number, words[head.list_at], "count of corners") if len(words) > head.list_at else -1
        )
        size = size or corners
        if corners not in (3, 4) or corners != size:
            raise lines.error(number, f"a facet of {max(corners, 0)} corners; all should have three, or all four")
        if len(words) != len(head.face) + corners:
            raise lines.error(number, f"{len(words)} words in the row of a facet, {len(head.face) + corners} are due")
        for word in words[head.list_at + 1 : head.list_at + 1 + corners]:
            index_number(lines, number, word)
        for word in words:
            finite_number(lines, number, word, "number", fortran=False)
    numbers = np.array([n for n, _ in rows])
    rest = b"\n".join([*(b" ".join(line.split()) for _, line in rows), b""])
    return rest, numbers[: head.n_vertices], numbers[head.n_vertices :], size


def _check_ply_binary(head: _PlyHead, data: bytes) -> int:
    """Corners per facet of a binary PLY of exactly the length announced, all facets with three or all with four."""
    order = "little" if head.format == "binary_little_endian" else "big"
    vertex_size = sum(_PLY_SIZES[p[0]] for p in head.vertex)
    body = len(data) - head.size
    start = head.size + head.n_vertices * vertex_size
    before = sum(_PLY_SIZES[p[0]] for p in head.face[: head.list_at])
    after = sum(_PLY_SIZES[p[0]] for p in head.face[head.list_at + 1 :])
    _, count_type, index_type, _ = head.face[head.list_at]
    count_size = _PLY_SIZES[count_type]
    at = start + before
    corners = int.from_bytes(data[at : at + count_size], order) if at + count_size <= len(data) else 3  # type: ignore[arg-type]
    if corners not in (3, 4):
        raise ShapeError(f"{head.name}: facet 1 has {corners:,} corners; all should have three, or all four")
    facet_size = before + count_size + corners * _PLY_SIZES[index_type] + after
    expected = head.n_vertices * vertex_size + head.n_facets * facet_size
    if body != expected:
        raise ShapeError(
            f"{head.name} announces {head.n_vertices:,} vertices and {head.n_facets:,} facets, {expected:,} bytes "
            f"if all have {corners} corners; {body:,} follow the header"
        )
    rows = np.frombuffer(data, dtype=np.uint8, offset=start).reshape(head.n_facets, facet_size)
    counts = rows[:, before : before + count_size]
    other = np.flatnonzero((counts != counts[0]).any(axis=1))
    if other.size:
        raise ShapeError(f"{head.name}: facet {other[0] + 1} has not {corners} corners, as facet 1 has; all should")
    return corners


def _load(data: bytes, name: str, kind: str) -> tuple[np.ndarray, np.ndarray]:
    import trimesh

    options: dict[str, Any] = {"fix_texture": False, "skip_materials": True} if kind == "ply" else {}
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error", DeprecationWarning)  # numbers that could not be read to their end
            mesh = trimesh.load_mesh(io.BytesIO(data), file_type=kind, process=False, **options)
            vertices, facets = np.array(mesh.vertices, dtype=np.float64), np.array(mesh.faces, dtype=np.int64)
    except Exception as error:  # whatever a library says of a broken file is the file's fault
        reason = " ".join(str(error).split())[:100] or type(error).__name__
        raise ShapeError(f"{name} cannot be read as {kind.upper()}: {reason}") from error
    return vertices.reshape(-1, 3), facets.reshape(-1, 3)


def _all_finite(name: str, vertices: np.ndarray) -> None:
    bad = np.flatnonzero(~(np.abs(vertices) <= 1e30).all(axis=1))
    if bad.size:
        raise ShapeError(f"{name}: vertex {bad[0] + 1} is at {vertices[bad[0]].tolist()}: coordinates must be finite")


def stl_bytes(vertices: np.ndarray, facets: np.ndarray, head: str) -> bytes:
    """The binary STL file of a surface, coordinates rounded to float32 as the format wants."""
    import trimesh

    mesh = trimesh.Trimesh(vertices, facets, process=False)
    data = mesh.export(file_type="stl")
    assert isinstance(data, bytes)
    line = head.splitlines()[0].encode("ascii")[:80] if head else b""
    return line.ljust(80) + data[80:]


def ply_bytes(vertices: np.ndarray, facets: np.ndarray, head: str) -> bytes:
    """The binary PLY file of a surface, coordinates as float64 (trimesh would round to float32)."""
    comments = "".join(f"comment {line}\n" for line in head.splitlines())
    text = (
        f"ply\nformat binary_little_endian 1.0\n{comments}element vertex {len(vertices)}\n"
        "property double x\nproperty double y\nproperty double z\n"
        f"element face {len(facets)}\nproperty list uchar int vertex_indices\nend_header\n"
    )
    rows = np.empty(len(facets), dtype=[("n", "u1"), ("corners", "<i4", (3,))])
    rows["n"], rows["corners"] = 3, facets
    return text.encode("ascii") + vertices.astype("<f8").tobytes() + rows.tobytes()
