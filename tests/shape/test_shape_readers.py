"""What the readers accept, in every way it is written, and that writing and reading are inverse."""

from __future__ import annotations

import struct
import time
import warnings

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_shape import CUBE_CORNERS, CUBE_QUADS, cube, same_facets
from numpy.testing import assert_allclose, assert_array_equal

from smallbody.errors import Note
from smallbody.shape import Shape, check_shape, make_shape, parse_shape, read_shape, shape_bytes, write_shape

TETRA_V = [(0.0, 0.0, 0.0), (1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)]
TETRA_F = [(0, 2, 1), (0, 1, 3), (0, 3, 2), (1, 2, 3)]
SUFFIXES = [".obj", ".tab", ".stl", ".ply"]


def is_tetra(shape: Shape) -> bool:
    return shape.vertices_m.tolist() == [list(v) for v in TETRA_V] and shape.facets.tolist() == [
        list(f) for f in TETRA_F
    ]


def v_lines() -> str:
    return "".join(f"v {x} {y} {z}\n" for x, y, z in TETRA_V)


def f_lines(base: int = 1) -> str:
    return "".join(f"f {a + base} {b + base} {c + base}\n" for a, b, c in TETRA_F)


OBJ = {
    "plain": v_lines() + f_lines(),
    "comments and blank lines": "# a body\n\n" + v_lines() + "\n   # corners\n" + f_lines() + "# end",
    "comments after statements": (v_lines() + f_lines()).replace("\n", " # so it is\n"),
    "windows line ends": (v_lines() + f_lines()).replace("\n", "\r\n"),
    "old mac line ends": (v_lines() + f_lines()).replace("\n", "\r"),
    "tabs and runs of blanks": (v_lines() + f_lines()).replace(" ", " \t  "),
    "indented": "  " + (v_lines() + f_lines()).replace("\n", "\n  "),
    "negative indices": v_lines() + f_lines(base=-4),
    "texture and normal numbers": v_lines()
    + "vt 0 0\nvn 0 0 1\n"
    + "f 1/1/1 3/1/1 2/1/1\nf 1//1 2//1 4//1\nf 1/1 4/1 3/1\nf 2 3 4\n",
    "all with slashes": v_lines()
    + "vn 0 0 1\n"
    + "".join(f"f {a + 1}//1 {b + 1}//1 {c + 1}//1\n" for a, b, c in TETRA_F),
    "lines continued": (v_lines() + f_lines())
    .replace("f 1 3 2", "f 1 \\\n3 \\\n2")
    .replace("v 1.0 0.0", "v 1.0\\\n0.0"),
    "facets ahead of vertices": f_lines() + v_lines(),
    "groups and materials": "mtllib a.mtl\no body\n"
    + v_lines()
    + "g side\nusemtl grey\ns off\n"
    + f_lines()
    + "l 1 2\n",
    "colours after coordinates": v_lines().replace("\n", " 0.5 0.5 0.5\n") + f_lines(),
    "exponents, signs, bare dots": v_lines().replace("1.0", "+1.E0").replace("0.0", ".0e-3") + f_lines(),
    "fortran exponents": v_lines().replace("1.0", "0.1D+01") + f_lines(),
    "byte order mark": "\ufeff" + v_lines() + f_lines(),
    "letters of other alphabets in comments": "# Körper\n" + v_lines() + f_lines(),
    "no line end at the end": (v_lines() + f_lines()).rstrip("\n"),
}


@pytest.mark.parametrize("style", OBJ)
def test_obj_is_read_however_it_is_written(style):
    assert is_tetra(parse_shape(OBJ[style].encode("utf-8"), "body.obj"))


def rows(vertices: bool, numbered: int | None, base: int, lead: str = "") -> str:
    out = []
    for k, row in enumerate(TETRA_V if vertices else TETRA_F):
        cells = [repr(x) for x in row] if vertices else [str(x + base) for x in row]
        number = [str(k + numbered)] if numbered is not None else []
        out.append(lead + " ".join(number + cells) + "\n")
    return "".join(out)


TABLES = {
    "two counts on a line": "4 4\n" + rows(True, None, 1) + rows(False, None, 1),
    "two lines of counts": "4\n4\n" + rows(True, None, 1) + rows(False, None, 1),
    "each count ahead of its rows": "4\n" + rows(True, None, 1) + "4\n" + rows(False, None, 1),
    "rows numbered from 1": "4 4\n" + rows(True, 1, 1) + rows(False, 1, 1),
    "rows numbered from 0, counted from 0": "4 4\n" + rows(True, 0, 0) + rows(False, 0, 0),
    "counted from 0": "4 4\n" + rows(True, None, 0) + rows(False, None, 0),
    "each count ahead, rows numbered": "4\n" + rows(True, 1, 1) + "4\n" + rows(False, 1, 1),
    "corner counts in the row": "4 4\n" + rows(True, None, 1) + rows(False, None, 1, "3 "),
    "corner counts on their own line": "4 4\n" + rows(True, None, 1) + rows(False, None, 1, "3\n"),
    "commas": ("4 4\n" + rows(True, 1, 1) + rows(False, 1, 1)).replace(" ", ", "),
    "comments": "# km\n! and more\n4 4 # counts\n\n" + rows(True, None, 1) + "! facets\n" + rows(False, None, 1),
    "windows line ends": ("4 4\n" + rows(True, None, 1) + rows(False, None, 1)).replace("\n", "\r\n"),
    "aligned in columns": ("   4     4\n" + rows(True, 1, 1, "      ") + rows(False, 1, 1, "    ")).replace(" ", "   "),
    "fortran exponents": "4 4\n" + rows(True, None, 1).replace("1.0", "1.0D0") + rows(False, None, 1),
    "as OBJ statements": v_lines() + f_lines(),
}


@pytest.mark.parametrize("style", TABLES)
@pytest.mark.parametrize("name", ["body.tab", "body.txt", "body.plt", "body.ver", "body"])
def test_tables_are_read_however_they_are_laid_out(style, name):
    assert is_tetra(parse_shape(TABLES[style].encode(), name))


def test_a_table_that_numbers_rows_from_0_counts_corners_from_0_though_vertex_0_is_idle():
    text = "5 4\n0 9.0 9.0 9.0\n" + rows(True, 1, 1) + rows(False, 0, 1)
    shape = parse_shape(text.encode(), "body.tab")
    assert shape.facets.tolist() == [[a + 1 for a in f] for f in TETRA_F]
    assert [fault.kind for fault in check_shape(shape)] == ["unused"]


def test_tables_may_hold_quads():
    text = "8 6\n" + "".join(f"{x} {y} {z}\n" for x, y, z in CUBE_CORNERS)
    text += "".join("4 " + " ".join(str(c + 1) for c in q) + "\n" for q in CUBE_QUADS)
    shape = parse_shape(text.encode(), "cube.tab")
    assert check_shape(shape) == []
    assert shape.mass.volume_m3 == pytest.approx(1.0)


def quads_obj(corners: np.ndarray) -> bytes:
    text = "".join(f"v {x} {y} {z}\n" for x, y, z in corners)
    return (text + "".join("f " + " ".join(str(c + 1) for c in q) + "\n" for q in CUBE_QUADS)).encode()


def test_flat_quads_are_split_without_a_word():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        shape = parse_shape(quads_obj(CUBE_CORNERS), "cube.obj")
    assert check_shape(shape) == []
    assert shape.mass.volume_m3 == pytest.approx(1.0)
    assert_array_equal(shape.source.facet_numbers, np.repeat(np.arange(1, 7), 2))
    assert_array_equal(shape.source.facet_lines, np.repeat(np.arange(9, 15), 2))


def test_quads_that_are_not_flat_are_split_with_a_note_that_names_the_first():
    corners = CUBE_CORNERS.copy()
    corners[7] += 0.2
    with pytest.warns(Note, match=r"3 polygons are not flat \(the first: facet 2, line 10\)"):
        shape = parse_shape(quads_obj(corners), "cube.obj")
    assert check_shape(shape) == []


def test_a_quad_with_a_notch_is_split_through_the_notch():
    # a dart: the corner at (1, 1) lies inside the triangle of the others
    text = b"v 0 0 0\nv 4 0 0\nv 1 1 0\nv 0 4 0\nf 1 2 3 4\n"
    shape = parse_shape(text, "dart.obj")
    assert_allclose(shape.areas_m2.sum(), 4.0)
    assert (shape.normals[:, 2] > 0).all()


def star(points: int) -> np.ndarray:
    angle = np.arange(2 * points) * np.pi / points
    return np.stack([np.cos(angle), np.sin(angle)], axis=1) * np.where(np.arange(2 * points) % 2, 0.4, 1.0)[:, None]


@pytest.mark.parametrize("points", [3, 5, 20])
@pytest.mark.parametrize("tilt", [0.0, 0.7, 1.9])
def test_polygons_with_notches_are_split_into_facets_of_the_same_area_and_side(points, tilt):
    ring = star(points)
    x, y = ring.T
    area = 0.5 * abs(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)))  # shoelace formula
    corners = np.stack([x, y * np.cos(tilt), y * np.sin(tilt)], axis=1)
    text = "".join(f"v {p[0]!r} {p[1]!r} {p[2]!r}\n" for p in corners.tolist())
    text += "f " + " ".join(str(k + 1) for k in range(2 * points)) + "\n"
    shape = parse_shape(text.encode(), "star.obj")
    assert len(shape.facets) == 2 * points - 2
    assert_allclose(shape.areas_m2.sum(), area, rtol=1e-9)
    assert_allclose(shape.normals @ [0.0, -np.sin(tilt), np.cos(tilt)], 1.0, rtol=1e-9)
    used = np.sort(shape.facets, axis=1)
    assert len(np.unique(used, axis=0)) == len(used)


@pytest.fixture(scope="module")
def spool() -> Shape:
    return make_shape("twolobe", 500, seed=4)


@pytest.mark.parametrize("suffix", SUFFIXES)
@pytest.mark.parametrize("unit", ["km", "m"])
def test_what_is_written_is_read_again(suffix, unit, spool, tmp_path):
    path = tmp_path / f"spool{suffix}"
    write_shape(spool, path, unit)
    again = read_shape(path, unit)
    # STL holds float32: 24 bits of the largest coordinate, here below 1024 m; km to m and back costs the last bit
    atol = 1024.0 * 2.0**-24 if suffix == ".stl" else 2e-13
    assert same_facets(again, spool, atol)
    assert check_shape(again) == []
    if suffix != ".stl":
        assert_array_equal(again.facets, spool.facets)
        if unit == "m":
            assert again.sha256 == spool.sha256
    assert [p.name for p in tmp_path.iterdir()] == [path.name]


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 10**6), size=st.floats(1e-6, 1e6), suffix=st.sampled_from(SUFFIXES))
def test_random_bodies_survive_writing_and_reading(seed, size, suffix):
    rng = np.random.default_rng(seed)
    ball = make_shape("sphere", 20)
    body = Shape(ball.vertices_m * rng.uniform(0.5, 1.5, (12, 1)) * size, ball.facets)
    again = parse_shape(shape_bytes(body, suffix, "m"), f"body{suffix}")
    assert same_facets(again, body, 1000.0 * size * 2.0**-24 if suffix == ".stl" else 0.0)
    assert check_shape(again) == []


@settings(max_examples=25, deadline=None)
@given(
    seed=st.integers(0, 10**6), style=st.sampled_from(["obj", "slashes", "negative", "tab", "numbered", "ply", "stl"])
)
def test_quick_and_careful_readers_agree(seed, style):
    rng = np.random.default_rng(seed)
    ball = make_shape("sphere", 20)
    body = Shape(ball.vertices_m * rng.uniform(0.5, 1.5, (12, 1)), ball.facets)
    v = [" ".join(repr(x) for x in row) for row in body.vertices_m.tolist()]
    f = body.facets.tolist()
    mesh = trimesh.Trimesh(body.vertices_m, body.facets, process=False)
    if style in ("obj", "slashes", "negative"):
        corner = {"obj": "{}", "slashes": "{0}/{0}", "negative": "{}"}[style]
        base = -len(v) if style == "negative" else 1
        text = "".join(f"v {x}\n" for x in v) + "".join(
            "f " + " ".join(corner.format(c + base) for c in t) + "\n" for t in f
        )
        careful = parse_shape(text.replace("v ", "v\t").encode(), "b.obj")  # a tab sends it to the careful reader
        quick = parse_shape(text.encode(), "b.obj")
    elif style in ("tab", "numbered"):
        number = (lambda k: f"{k + 1} ") if style == "numbered" else (lambda k: "")
        text = f"{len(v)} {len(f)}\n" + "".join(f"{number(k)}{x}\n" for k, x in enumerate(v))
        text += "".join(number(k) + " ".join(str(c + 1) for c in t) + "\n" for k, t in enumerate(f))
        quick = parse_shape(text.encode(), "b.tab")
        careful = parse_shape(
            text.replace(v[-1], v[-1].replace("e", "D") + " ").replace("\n1 ", "\n+1 ").encode(), "b.tab"
        )
    else:
        text = mesh.export(file_type="ply", encoding="ascii") if style == "ply" else mesh.export(file_type="stl_ascii")
        quick = parse_shape(mesh.export(file_type=style), f"b.{style}")
        careful = parse_shape(text if isinstance(text, bytes) else text.encode(), f"b.{style}")
        assert same_facets(quick, body, 1e-4)
        assert same_facets(careful, quick, 1e-4)
        return
    assert quick.sha256 == careful.sha256 == body.sha256
    assert_array_equal(quick.source.facet_lines, careful.source.facet_lines)
    assert_array_equal(quick.source.vertex_lines, careful.source.vertex_lines)


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_a_mesh_library_reads_what_we_write(suffix, spool, tmp_path):
    path = tmp_path / f"spool{suffix}"
    write_shape(spool, path, "m")
    if suffix == ".tab":  # no library knows it; NumPy does
        numbers = np.array(path.read_text().split("\n", 1)[1].split(), dtype=float)
        v, f = int(numbers[0]), int(numbers[1])
        mesh = trimesh.Trimesh(
            numbers[2 : 2 + 3 * v].reshape(-1, 3), numbers[2 + 3 * v :].reshape(f, 3).astype(int) - 1
        )
    else:
        mesh = trimesh.load_mesh(path)
    assert mesh.is_watertight
    assert mesh.volume == pytest.approx(spool.mass.volume_m3, rel=1e-6)


def binary_ply(order: str, index: str, corners: int, extra: bool) -> bytes:
    types = {"uint": "I", "int": "i", "ushort": "H", "uchar": "B"}
    mark = "<" if order == "little" else ">"
    head = f"ply\nformat binary_{order}_endian 1.0\ncomment a cube\nelement vertex 8\n"
    head += "property float x\nproperty float y\nproperty float z\n" + ("property uchar red\n" if extra else "")
    head += f"element face {6 if corners == 4 else 12}\n" + ("property uchar flags\n" if extra else "")
    head += f"property list uchar {index} vertex_indices\nend_header\n"
    body = b"".join(struct.pack(f"{mark}3f", *p) + (b"\x07" if extra else b"") for p in CUBE_CORNERS)
    for row in CUBE_QUADS if corners == 4 else cube().facets:
        body += (b"\x09" if extra else b"") + struct.pack(f"{mark}B{corners}{types[index]}", corners, *row)
    return head.encode() + body


@pytest.mark.parametrize("order", ["little", "big"])
@pytest.mark.parametrize("index", ["uint", "int", "ushort", "uchar"])
@pytest.mark.parametrize("corners", [3, 4])
@pytest.mark.parametrize("extra", [False, True])
def test_binary_ply_is_read_in_every_type_and_order(order, index, corners, extra):
    shape = parse_shape(binary_ply(order, index, corners, extra), "cube.ply")
    assert check_shape(shape) == []
    assert shape.mass.volume_m3 == pytest.approx(1.0)


def test_the_content_tells_the_format_where_the_name_does_not(spool):
    for suffix in SUFFIXES:
        assert same_facets(parse_shape(shape_bytes(spool, suffix, "m"), "spool.shape"), spool, 1e-3)


def test_rounded_coordinates_are_written_short(spool):
    lines = shape_bytes(spool, ".obj", "km", decimals=6).decode().splitlines()
    assert all(len(word) <= 9 for line in lines if line.startswith("v ") for word in line.split())
    assert not any("-0.0 " in f"{line} " for line in lines)


def test_windows_line_numbers_are_those_of_an_editor():
    shape = parse_shape(OBJ["windows line ends"].encode(), "body.obj")
    assert shape.source.vertex_lines.tolist() == [1, 2, 3, 4]
    assert shape.source.facet_lines.tolist() == [5, 6, 7, 8]


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_two_hundred_thousand_facets_are_read_and_checked_in_seconds(suffix, tmp_path):
    ball = make_shape("sphere", 200_000)
    path = tmp_path / f"ball{suffix}"
    write_shape(ball, path)
    read_shape(path)  # imports done
    start = time.process_time()
    assert check_shape(read_shape(path)) == []
    assert time.process_time() - start < 4.0  # about one second on an idle core
