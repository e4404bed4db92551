"""Plain tables of vertices and facets, as planetary archives publish shape models (common practice, no one standard).

A line of counts, then the vertices, then the facets, one a line:

    nv nf | nv, then nf on the next line | nv, the vertices, nf, the facets
    [row number] x y z
    [row number] a b c | 3 a b c | a line with 3 alone, then a line with a b c

Numbers are parted by blanks or commas; `#` begins a comment, `!` a line of comment. Facets count vertices from 0 or
from 1: from 0 where vertex 0 is used or the vertices' row numbers begin with 0, otherwise from 1.
"""

from __future__ import annotations

import numpy as np

from smallbody.shape.model import Shape
from smallbody.shape.text import (
    Lines,
    assemble,
    finite_number,
    index_number,
    quick_numbers,
    quick_whole_numbers,
    whole_number,
)

Rows = list[tuple[int, bytes]]  # line number and content


def parse_table(data: bytes, name: str) -> Shape:
    """The surface in a table, in the table's own length unit.

    data : content of the file
    name : what to call the file in messages
    raises : ShapeError, with file and line
    warns : Note, where polygons that are not flat were split
    """
    lines = Lines(data, name)
    rows = _rows(lines)
    number, first = rows[0][0], rows[0][1].split()
    if len(first) > 2:
        raise lines.error(number, f"a table begins with its counts of vertices and facets, here are {len(first)} words")
    n_vertices = _count(lines, number, first[0], "vertices")
    start, n_facets, counts_line = 1, 0, number
    if len(first) == 2:
        n_facets = _count(lines, number, first[1], "facets")
    elif len(rows) > 1 and len(rows[1][1].split()) == 1:
        start, counts_line = 2, rows[1][0]
        n_facets = _count(lines, counts_line, rows[1][1].split()[0], "facets")
    if n_vertices > len(rows) - start:
        raise lines.error(
            number, f"{n_vertices:,} vertices are announced; only {_rest(len(rows) - start)} (is the file cut short?)"
        )
    vertex_rows = rows[start : start + n_vertices]
    start += n_vertices
    if not n_facets:
        if start == len(rows):
            raise lines.error(rows[-1][0], "the file ends after the vertices: the count of facets should follow")
        counts_line, words = rows[start][0], rows[start][1].split()
        if len(words) != 1:
            raise lines.error(
                counts_line,
                f"after {n_vertices:,} vertices comes the count of facets alone, here are {len(words)} words",
            )
        n_facets = _count(lines, counts_line, words[0], "facets")
        start += 1
    facet_rows = rows[start:]

    vertices, first_row = _vertices(lines, vertex_rows)
    counted_apart = bool(facet_rows) and len(facet_rows[0][1].split()) == 1
    expected = 2 * n_facets if counted_apart else n_facets
    if len(facet_rows) < expected:
        raise lines.error(
            counts_line, f"{n_facets:,} facets are announced; only {_rest(len(facet_rows))} (is the file cut short?)"
        )
    if len(facet_rows) > expected:
        raise lines.error(facet_rows[expected][0], f"more lines after the {n_facets:,} facets that are announced")
    if counted_apart:
        corners, counts, facet_lines = _facets_counted_apart(lines, facet_rows)
    else:
        corners, counts, facet_lines = _facets(lines, facet_rows)

    corners = _from_zero(lines, corners, counts, facet_lines, n_vertices, first_row)
    return assemble(lines, vertices, np.array([n for n, _ in vertex_rows]), corners, counts, facet_lines)


def _rows(lines: Lines) -> Rows:
    text = lines.lines
    if b"," in lines.data:
        text = [line.replace(b",", b" ") for line in text]
    if b"#" in lines.data or b"!" in lines.data:
        text = [b"" if line.lstrip().startswith(b"!") else line.split(b"#", 1)[0] for line in text]
    rows = [(n, line) for n, line in enumerate(text, start=1) if line and not line.isspace()]
    if not rows:
        raise lines.error(None, "holds only comments")
    return rows


def _rest(left: int) -> str:
    return "1 line follows" if left == 1 else f"{left:,} lines follow"


def _count(lines: Lines, number: int, word: bytes, what: str) -> int:
    count = whole_number(lines, number, word, f"count of {what}")
    if count < 4:
        raise lines.error(number, f"a closed surface has at least 4 {what}, not {count:,}")
    return count


def _vertices(lines: Lines, rows: Rows) -> tuple[np.ndarray, int | None]:
    """Vertices (v, 3) and the first row number, if rows are numbered."""
    columns = len(rows[0][1].split())
    if columns not in (3, 4):
        raise lines.error(rows[0][0], f"a vertex takes x y z, with or without a row number, here are {columns} words")
    values = quick_numbers([line for _, line in rows], columns)
    if values is None:
        careful = []
        for number, line in rows:
            words = line.split()
            if len(words) != columns:
                raise lines.error(number, f"{len(words)} words in the row of a vertex; the rows before have {columns}")
            careful.append([finite_number(lines, number, w, "coordinate") for w in words])
        values = np.array(careful)
    if columns == 3:
        return values, None
    return values[:, 1:], _row_numbers(lines, rows, values[:, 0], "four words in the row of a vertex")


def _row_numbers(lines: Lines, rows: Rows, numbers: np.ndarray, said: str) -> int:
    first = numbers[0]
    if first not in (0, 1):
        raise lines.error(rows[0][0], f"{said}: the first should be a row number, 0 or 1 here, not {first:g}")
    wrong = np.flatnonzero(numbers != np.arange(len(numbers)) + first)
    if wrong.size:
        at = int(wrong[0])
        raise lines.error(rows[at][0], f"row number {numbers[at]:g} where {at + int(first)} is due")
    return int(first)


def _facets(lines: Lines, rows: Rows) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Corners one after the other as the file counts them, corners of each facet, and lines."""
    facet_lines = np.array([n for n, _ in rows])
    columns = len(rows[0][1].split())
    if columns in (3, 4):
        values = quick_whole_numbers([line for _, line in rows], columns)
        if values is not None:
            if columns == 4:
                if not (values[:, 0] == 3).all():
                    _row_numbers(lines, rows, values[:, 0], "four words in the row of a facet")
                values = values[:, 1:]
            return values.ravel(), np.full(len(values), 3), facet_lines
    words = [line.split() for _, line in rows]
    sizes = [len(w) for w in words]
    if all(size >= 4 and w[0] == b"%d" % (size - 1) for size, w in zip(sizes, words)):
        words = [w[1:] for w in words]  # each row says how many corners follow
    elif columns not in (3, 4):
        raise lines.error(
            rows[0][0], f"a facet takes a b c, a row number or a 3 before them or not; here are {columns} words"
        )
    else:
        for (number, _), size in zip(rows, sizes):
            if size != columns:
                raise lines.error(number, f"{size} words in the row of a facet; the rows before have {columns}")
        if columns == 4:
            leading = [whole_number(lines, n, w[0], "row number") for (n, _), w in zip(rows, words)]
            _row_numbers(lines, rows, np.array(leading), "four words in the row of a facet")
            words = [w[1:] for w in words]
    corners = [index_number(lines, n, w) for (n, _), row in zip(rows, words) for w in row]
    return np.array(corners), np.array([len(row) for row in words]), facet_lines


def _facets_counted_apart(lines: Lines, rows: Rows) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    corners, counts = [], []
    for (number, alone), (next_number, line) in zip(rows[::2], rows[1::2]):
        words, announced = line.split(), alone.split()
        if len(announced) != 1:
            raise lines.error(
                number, f"a facet's count of corners stands alone on its line, here are {len(announced)} words"
            )
        count = whole_number(lines, number, announced[0], "count of corners")
        if count < 3 or count != len(words):
            raise lines.error(next_number, f"a facet of {len(words)} corners where {count} are announced (3 or more)")
        corners += [index_number(lines, next_number, w) for w in words]
        counts.append(count)
    return np.array(corners), np.array(counts), np.array([n for n, _ in rows[1::2]])


def _from_zero(
    lines: Lines,
    corners: np.ndarray,
    counts: np.ndarray,
    facet_lines: np.ndarray,
    n_vertices: int,
    first_row: int | None,
) -> np.ndarray:
    """The corners counted from 0, whatever the file counts from."""
    smallest = int(corners.min())
    base = 0 if smallest <= 0 else (1 if first_row is None else first_row)
    if base == 0 and first_row == 1:
        base = 1  # the rows say so; the message below says which corner does not fit
    wrong = (corners < base) | (corners >= n_vertices + base)
    if wrong.any():
        line = facet_lines[np.repeat(np.arange(len(counts)), counts)[int(np.flatnonzero(wrong)[0])]]
        found = int(corners[wrong][0])
        raise lines.error(
            int(line), f"corner {found:,} names no vertex: there are {n_vertices:,}, counted from {base} in this file"
        )
    return corners - base


def table_bytes(vertices: np.ndarray, facets: np.ndarray, head: str) -> bytes:
    """The table of a surface: counts, vertices, facets counted from 1, no row numbers."""
    out = [f"# {line}" for line in head.splitlines()]
    out.append(f"{len(vertices)} {len(facets)}")
    out += [f"{x!r} {y!r} {z!r}" for x, y, z in vertices.tolist()]
    out += [f"{a} {b} {c}" for a, b, c in (facets + 1).tolist()]
    return ("\n".join(out) + "\n").encode("ascii")
