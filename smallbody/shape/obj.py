"""Wavefront OBJ: `v` and `f` statements; everything else is passed over.

Polygons are split, indices may be negative (counted back from the latest vertex), corners may carry texture and normal
numbers (`v/vt/vn`), a backslash continues a line, and lines end any way lines end.
"""

from __future__ import annotations

import re

import numpy as np

from smallbody.shape.model import Shape
from smallbody.shape.text import Lines, assemble, finite_number, index_number, quick_numbers, quick_whole_numbers

_ATTRIBUTES = re.compile(rb"/[0-9/+-]*")


def parse_obj(data: bytes, name: str) -> Shape:
    """The surface in an OBJ file, in the file's own length unit.

    data : content of the file
    name : what to call the file in messages
    raises : ShapeError, with file and line
    warns : Note, where polygons that are not flat were split
    """
    lines = Lines(data, name)
    quick = _quick(lines)
    vertices, vertex_lines, corners, counts, facet_lines = _careful(lines) if quick is None else quick
    return assemble(lines, vertices, vertex_lines, corners, counts, facet_lines)


Parts = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray]


def _quick(lines: Lines) -> Parts | None:
    """All numbers at once where the file is plain; None where anything asks for a closer look."""
    text = lines.lines
    v_at = [i for i, line in enumerate(text) if line.startswith(b"v ")]
    f_at = [i for i, line in enumerate(text) if line.startswith(b"f ")]
    if b"\\" in lines.data or b"\t" in lines.data or not v_at or not f_at:
        return None
    others = len(text) - len(v_at) - len(f_at)
    if others > 0:
        known = sum(
            1 for line in text if not line or line.startswith((b"#", b"vn ", b"vt ", b"g ", b"s ", b"o ", b"usemtl "))
        )
        if known != others:
            return None
    v_text = [text[i][2:] for i in v_at]
    f_text = [text[i][2:] for i in f_at]
    vertices = quick_numbers(v_text, 3)
    if vertices is None:
        return None
    joined = b"\n".join(f_text)
    if b"/" in joined:
        if b" /" in joined or joined.startswith(b"/") or b"\n/" in joined:
            return None
        f_text = _ATTRIBUTES.sub(b"", joined).split(b"\n")
    facets = quick_whole_numbers(f_text, 3)
    if facets is None or not ((facets >= 1) & (facets <= len(vertices))).all():
        return None
    if f_at[0] < v_at[-1] and (facets.max(axis=1) > np.searchsorted(v_at, f_at)).any():
        return None  # a facet ahead of its vertices: the careful reader knows what to say
    corners = facets.ravel() - 1
    return vertices, np.array(v_at) + 1, corners, np.full(len(facets), 3), np.array(f_at) + 1


def _careful(lines: Lines) -> Parts:
    """Statement by statement, with a message for whatever is wrong."""
    vertices: list[tuple[float, float, float]] = []
    vertex_lines: list[int] = []
    corners: list[int] = []
    counts: list[int] = []
    facet_lines: list[int] = []
    ahead: list[tuple[int, int]] = []  # line and index of corners not yet seen
    for number, line in lines.statements():
        words = line.split(b"#", 1)[0].split()
        if not words:
            continue
        if words[0] == b"v":
            if len(words) < 4:
                raise lines.error(number, f"a vertex takes three coordinates, here are {len(words) - 1}")
            x, y, z = (finite_number(lines, number, word, "coordinate") for word in words[1:4])
            vertices.append((x, y, z))
            vertex_lines.append(number)
        elif words[0] == b"f":
            if len(words) < 4:
                raise lines.error(number, f"a facet takes three corners or more, here are {len(words) - 1}")
            for word in words[1:]:
                index = _index(lines, number, word)
                if index < 0:
                    if -index > len(vertices):
                        raise lines.error(
                            number, f"corner {index} counts back further than the {len(vertices):,} vertices so far"
                        )
                    index += len(vertices) + 1
                elif index > len(vertices):
                    ahead.append((number, index))
                corners.append(index - 1)
            counts.append(len(words) - 1)
            facet_lines.append(number)
        elif not words[0][:1].isalpha():
            raise lines.error(number, f"{lines.show(words[0])} begins no OBJ statement")
    if not vertices:
        raise lines.error(None, "holds no vertices (lines that begin with v)")
    if not counts:
        raise lines.error(None, "holds no facets (lines that begin with f)")
    for number, index in ahead:
        if index > len(vertices):
            raise lines.error(number, f"corner {index:,} names no vertex: there are {len(vertices):,}")
    return np.array(vertices), np.array(vertex_lines), np.array(corners), np.array(counts), np.array(facet_lines)


def _index(lines: Lines, number: int, word: bytes) -> int:
    index = index_number(lines, number, word.split(b"/", 1)[0], word)
    if index == 0:
        raise lines.error(number, "corner 0 names no vertex: OBJ counts from 1")
    return index


def obj_bytes(vertices: np.ndarray, facets: np.ndarray, head: str) -> bytes:
    """The OBJ file of a surface: coordinates with as many digits as float64 holds."""
    out = [f"# {line}" for line in head.splitlines()]
    out += [f"v {x!r} {y!r} {z!r}" for x, y, z in vertices.tolist()]
    out += [f"f {a} {b} {c}" for a, b, c in (facets + 1).tolist()]
    return ("\n".join(out) + "\n").encode("ascii")
