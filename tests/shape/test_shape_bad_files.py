"""Files that hold no shape: each is refused with one line that says what is wrong and where."""

from __future__ import annotations

import os
import stat
import struct

import numpy as np
import pytest
from naive_shape import cube

from smallbody.errors import ShapeError, SmallbodyError
from smallbody.shape import Shape, make_shape, read_shape, require_usable, shape_bytes, write_shape

SUFFIXES = [".obj", ".tab", ".stl", ".ply"]
V = "v 0 0 0\nv 1 0 0\nv 0 1 0\nv 0 0 1\n"
F = "f 1 3 2\nf 1 2 4\nf 1 4 3\nf 2 3 4\n"
T = "4 4\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n1 3 2\n1 2 4\n1 4 3\n2 3 4\n"
PLY = (
    "ply\nformat ascii 1.0\nelement vertex 4\nproperty float x\nproperty float y\nproperty float z\n"
    "element face 4\nproperty list uchar int vertex_indices\nend_header\n"
    "0 0 0\n1 0 0\n0 1 0\n0 0 1\n3 0 2 1\n3 0 1 3\n3 0 3 2\n3 1 2 3\n"
)
STL = "solid a\n" + 4 * (
    "facet normal 0 0 1\nouter loop\nvertex 0 0 0\nvertex 1 0 0\nvertex 0 1 0\nendloop\nendfacet\n"
) + "endsolid a\n"  # fmt: skip

BAD = [  # name, content, what the message must hold
    ("empty.obj", "", "is empty"),
    ("empty.tab", "  \n\n", "is empty"),
    ("empty.stl", "", "is empty"),
    ("empty.ply", "", "is empty"),
    ("comments.obj", "# nothing\n", "holds no vertices"),
    ("comments.tab", "# nothing\n", "holds only comments"),
    ("points.obj", V, "holds no facets"),
    ("facets.obj", F, "holds no vertices"),
    # numbers
    ("nan.obj", V.replace("v 1 0 0", "v nan 0 0") + F, "line 2: coordinate 'nan' is not finite"),
    ("inf.obj", V.replace("v 1 0 0", "v 1 -inf 0") + F, "line 2: coordinate '-inf' is not finite"),
    ("huge.obj", V.replace("v 1 0 0", "v 1e999 0 0") + F, "line 2: coordinate '1e999' is not finite"),
    ("large.obj", V.replace("v 1 0 0", "v 1e200 0 0") + F, "line 2: coordinate '1e200' is out of any body's range"),
    ("word.obj", V.replace("v 1 0 0", "v one 0 0") + F, "line 2: coordinate 'one' is not a number"),
    ("grouped.obj", V.replace("v 1 0 0", "v 1_0 0 0") + F, "line 2: coordinate '1_0' is not a number"),
    ("short.obj", V.replace("v 1 0 0", "v 1 0") + F, "line 2: a vertex takes three coordinates, here are 2"),
    ("nan.tab", T.replace("1 0 0", "NaN 0 0", 1), "line 3: coordinate 'NaN' is not finite"),
    ("inf.tab", T.replace("1 0 0", "1 Infinity 0", 1), "line 3: coordinate 'Infinity' is not finite"),
    ("nan.ply", PLY.replace("1 0 0", "nan 0 0", 1), "line 11: number 'nan' is not finite"),
    ("nan.stl", STL.replace("1 0 0", "nan 0 0", 1), "line 5: coordinate 'nan' is not finite"),
    # corners
    ("two.obj", V + F.replace("f 1 3 2", "f 1 3"), "line 5: a facet takes three corners or more, here are 2"),
    ("zero.obj", V + F.replace("f 1 3 2", "f 0 3 2"), "line 5: corner 0 names no vertex"),
    ("five.obj", V + F.replace("f 1 3 2", "f 1 3 5"), "line 5: corner 5 names no vertex: there are 4"),
    ("back.obj", V + F.replace("f 1 3 2", "f 1 3 -5"), "line 5: corner -5 counts back further than the 4 vertices"),
    ("index.obj", V + F.replace("f 1 3 2", "f 1 3 99999999999999999999"), "larger than any vertex number"),
    ("billion.obj", V + F.replace("f 1 3 2", "f 1 3 2000000000"), "larger than any vertex number"),
    ("million.obj", V + F.replace("f 1 3 2", "f 1 3 987654321"), "line 5: corner 987,654,321 names no vertex"),
    ("real.obj", V + F.replace("f 1 3 2", "f 1 3.0 2"), "line 5: corner '3.0' is not a vertex number"),
    ("slash.obj", V + F.replace("f 1 3 2", "f 1 /3 2"), "line 5: corner '/3' is not a vertex number"),
    ("five.tab", T.replace("1 3 2", "1 3 5"), "line 6: corner 5 names no vertex: there are 4, counted from 1"),
    ("both.tab", T.replace("1 3 2", "0 3 2"), "line 7: corner 4 names no vertex: there are 4, counted from 0"),
    ("minus.tab", T.replace("1 3 2", "1 3 -1"), "names no vertex"),
    ("real.tab", T.replace("1 3 2", "1 3 2.5"), "line 6: corner '2.5' is not a vertex number"),
    ("two.tab", T.replace("1 3 2", "3 2"), "line 6: a facet takes a b c"),
    ("few.tab", T.replace("1 2 4", "2 4"), "line 7: 2 words in the row of a facet"),
    ("pair.tab", T.replace("1 3 2", "2\n1 3").replace("1 2 4", "3\n1 2 4").replace("1 4 3", "3\n1 4 3")
     .replace("2 3 4", "3\n2 3 4"), "line 7: a facet of 2 corners"),
    ("index.tab", T.replace("1 3 2", "1 3 99999999999999999999"), "larger than any vertex number"),
    ("five.ply", PLY.replace("3 0 2 1", "3 0 2 4"), "line 14: facet 1 has corners [0, 2, 4]; vertices are 0 to 3"),
    ("minus.ply", PLY.replace("3 0 2 1", "3 0 2 -1"), "line 14: facet 1 has corners [0, 2, -1]"),
    ("two.ply", PLY.replace("3 0 2 1", "2 0 2"), "line 14: a facet of 2 corners"),
    # cut short, or counts that cannot be
    ("cut.tab", T[:-16], "line 1: 4 facets are announced; only 2 lines follow"),
    ("cut2.tab", "4 4\n0 0 0\n1 0 0\n", "line 1: 4 vertices are announced; only 2 lines follow"),
    ("cut3.tab", "4\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n", "the count of facets should follow"),
    ("enormous.tab", T.replace("4 4", "999999999 4", 1), "999,999,999 vertices are announced; only 8 lines follow"),
    ("enormous2.tab", T.replace("4 4", "4 999999999", 1), "999,999,999 facets are announced; only 4 lines follow"),
    ("enormous3.tab", T.replace("4 4", "1e9 4", 1), "line 1: count of vertices '1e9' is not a whole number"),
    ("enormous4.tab", T.replace("4 4", "99999999999999999999 4", 1), "is too large for any shape"),
    ("more.tab", T + "1 2 3\n", "line 10: more lines after the 4 facets"),
    ("minus.tab", T.replace("4 4", "-4 4", 1), "line 1: count of vertices '-4' is not a whole number"),
    ("none.tab", T.replace("4 4", "0 0", 1), "line 1: a closed surface has at least 4 vertices, not 0"),
    ("words.tab", "this is no table\n", "line 1: a table begins with its counts"),
    ("rows.tab", "4 4\n1 0 0 0\n2 1 0 0\n4 0 1 0\n3 0 0 1\n" + T[-24:], "line 4: row number 4 where 3 is due"),
    ("cut.ply", PLY[:-8], "only 7 lines follow (is the file cut short?)"),
    ("enormous.ply", PLY.replace("vertex 4", "vertex 999999999"), "announces 999,999,999 vertices"),
    ("header.ply", PLY[:40], "has no line end_header"),
    ("noxyz.ply", PLY.replace("float z", "float w"), "should give every vertex the properties x, y, z"),
    ("other.ply", "PLY" + PLY[3:], "does not begin with ply"),
    ("cut.stl", STL[:-40], "is due"),
    ("cut2.stl", STL[:-11], "the file ends before endsolid"),
    ("order.stl", STL.replace("outer loop", "loop", 1), "line 3: 'loop' where outer loop is due"),
    ("other.stl", "hello\n", "is no STL file"),
    # binary
    ("garbage.obj", bytes(range(256)) * 8, "is not text: byte 0x00"),
    ("garbage.tab", b"4 4\n\x00\x01", "line 2: is not text: byte 0x00"),
    ("garbage.stl", bytes(range(256)) * 8, "it has 2,048 (is the file cut short?)"),
    ("garbage.ply", bytes(range(256)) * 8, "does not begin with ply"),
    ("letters.obj", "¡hola!\n" + V + F, "begins no OBJ statement"),
]  # fmt: skip


@pytest.mark.parametrize(("name", "content", "said"), BAD, ids=[b[0] for b in BAD])
def test_a_bad_file_is_refused_in_one_line_that_names_file_and_place(name, content, said, tmp_path):
    path = tmp_path / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
    with pytest.raises(ShapeError) as caught:
        read_shape(path)
    message = str(caught.value)
    assert said in message
    assert name in message
    assert "\n" not in message
    assert message.isprintable()
    assert len(message) < 300 + len(str(path))


@pytest.mark.parametrize("suffix", SUFFIXES)
@pytest.mark.parametrize("part", [0.1, 0.3, 0.5, 0.9, 0.99])
def test_a_file_cut_short_is_refused_when_read_or_when_checked(suffix, part, tmp_path):
    whole = shape_bytes(make_shape("gaussian", 240), suffix)
    path = tmp_path / f"cut{suffix}"
    path.write_bytes(whole[: int(part * len(whole))])
    with pytest.raises(ShapeError, match="cut"):
        require_usable(read_shape(path))


def test_a_binary_ply_that_is_longer_or_mixed_is_refused(tmp_path):
    whole = shape_bytes(cube(), ".ply")
    path = tmp_path / "cube.ply"
    path.write_bytes(whole + b"\0")
    with pytest.raises(ShapeError, match="bytes if all have 3 corners; 349 follow"):
        read_shape(path)
    broken = bytearray(whole)
    broken[-13] = 4
    path.write_bytes(broken)
    with pytest.raises(ShapeError, match="facet 12 has not 3 corners"):
        read_shape(path)
    path.write_bytes(whole[:-4] + struct.pack("<i", -7))
    with pytest.raises(ShapeError, match="facet 12 has corners"):
        read_shape(path)


@pytest.mark.parametrize("suffix", [".stl", ".ply"])
def test_binary_coordinates_that_are_not_finite_are_refused(suffix, tmp_path):
    shape = Shape(cube().vertices_m * [1.0, 1.0, 1.0] + [0.0, 0.0, 0.125], cube().facets)
    path = tmp_path / f"cube{suffix}"
    wanted, broken = (struct.pack("<f", 0.125), "<f") if suffix == ".stl" else (struct.pack("<d", 0.125), "<d")
    path.write_bytes(shape_bytes(shape, suffix, "m").replace(wanted, struct.pack(broken, float("nan")), 1))
    with pytest.raises(ShapeError, match="coordinates must be finite"):
        read_shape(path)


def test_what_is_no_ordinary_file_is_refused(tmp_path):
    with pytest.raises(ShapeError, match=r"cannot read .*No such file"):
        read_shape(tmp_path / "missing.obj")
    with pytest.raises(ShapeError, match="is a folder"):
        read_shape(tmp_path)
    with pytest.raises(ShapeError, match=r"cannot read .*null"):
        read_shape("a\0b.obj")
    os.mkfifo(tmp_path / "pipe.obj")
    with pytest.raises(ShapeError, match="not an ordinary file"):
        read_shape(tmp_path / "pipe.obj")
    with pytest.raises(ShapeError, match=r"cannot read"):
        read_shape(tmp_path / ("x" * 300 + ".obj"))


def test_a_file_that_may_not_be_read_is_refused(tmp_path, monkeypatch):
    from pathlib import Path

    path = tmp_path / "cube.obj"
    write_shape(cube(), path)

    def denied(self: Path) -> bytes:  # a stand-in: the tests may run as the one user who may read everything
        raise PermissionError(13, "Permission denied", str(self))

    monkeypatch.setattr(Path, "read_bytes", denied)
    with pytest.raises(ShapeError, match=r"cannot read .*Permission denied"):
        read_shape(path)


def test_a_file_too_large_for_any_shape_is_not_even_opened(tmp_path):
    path = tmp_path / "large.obj"
    with path.open("wb") as sparse:
        sparse.truncate(3 * 1024**3)
    with pytest.raises(ShapeError, match="at most"):
        read_shape(path)


def test_an_unknown_unit_or_format_is_refused(tmp_path):
    with pytest.raises(ShapeError, match='length_unit is "km" or "m"'):
        read_shape(tmp_path / "x.obj", "cm")
    with pytest.raises(ShapeError, match=r"no shape format goes by '\.xyz'"):
        write_shape(cube(), tmp_path / "x.xyz")
    assert list(tmp_path.iterdir()) == []


def test_writing_leaves_the_old_file_or_the_new_one_and_nothing_else(tmp_path, monkeypatch):
    path = tmp_path / "cube.obj"
    write_shape(cube(), path)
    before = path.read_bytes()

    def full(handle: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(ShapeError, match=r"cannot write .*cube\.obj: No space left on device"):
        write_shape(make_shape("sphere", 500), path)
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["cube.obj"]
    monkeypatch.undo()
    write_shape(make_shape("sphere", 500), path)
    assert path.read_bytes() != before
    assert stat.S_IMODE(path.stat().st_mode) & 0o444


def test_a_folder_that_cannot_be_written_is_named(tmp_path):
    with pytest.raises(ShapeError, match=r"cannot write .*No such file or directory"):
        write_shape(cube(), tmp_path / "nowhere" / "cube.obj")
    (tmp_path / "folder.obj").mkdir()
    with pytest.raises(ShapeError, match=r"cannot write"):
        write_shape(cube(), tmp_path / "folder.obj")
    assert [p.name for p in tmp_path.iterdir()] == ["folder.obj"]


def test_no_count_in_a_file_is_trusted_with_memory(tmp_path):
    import tracemalloc

    tracemalloc.start()
    for name, text in (
        ("a.tab", T.replace("4 4", "900000000 900000000", 1)),
        ("a.ply", PLY.replace(" 4\n", " 900000000\n")),
    ):
        (tmp_path / name).write_text(text)
        with pytest.raises(ShapeError):
            read_shape(tmp_path / name)
    (tmp_path / "a.stl").write_bytes(b"\0" * 80 + struct.pack("<I", 900_000_000) + b"\0" * 50)
    with pytest.raises(ShapeError):
        read_shape(tmp_path / "a.stl")
    assert tracemalloc.get_traced_memory()[1] < 20e6
    tracemalloc.stop()


def test_shape_errors_are_the_kind_the_command_line_turns_into_a_line():
    with pytest.raises(SmallbodyError) as caught:
        require_usable(Shape(cube().vertices_m, cube().facets[1:]))
    assert caught.value.exit_code == 2
    assert np.isfinite(len(caught.value.details["faults"]))
