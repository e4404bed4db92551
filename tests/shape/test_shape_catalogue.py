"""The invented bodies in shapes/ are what their recipe makes."""

from __future__ import annotations

import runpy
import sys
from pathlib import Path

import pytest

from smallbody.shape import check_shape, describe, read_shape

SHAPES = Path(__file__).parents[2] / "shapes"
BODIES = ["loaf.tab", "potsherd.obj", "spool.obj", "teetotum.obj", "thimble.obj", "vane.obj"]


def test_the_recipe_makes_the_files_byte_for_byte(monkeypatch, capsys):
    monkeypatch.setattr(sys, "argv", ["remake.py", "--check"])
    with pytest.raises(SystemExit) as left:
        runpy.run_path(str(SHAPES / "remake.py"), run_name="__main__")
    assert (left.value.code, capsys.readouterr().err) == (0, "")


def test_the_recipe_notices_a_file_that_was_touched(monkeypatch, capsys, tmp_path):
    for path in SHAPES.iterdir():
        if path.is_file():
            (tmp_path / path.name).write_bytes(path.read_bytes())
    (tmp_path / "vane.obj").write_bytes((tmp_path / "vane.obj").read_bytes() + b"# touched\n")
    monkeypatch.setattr(sys, "argv", ["remake.py", "--check"])
    with pytest.raises(SystemExit) as left:
        runpy.run_path(str(tmp_path / "remake.py"), run_name="__main__")
    assert left.value.code == 1
    assert "vane.obj" in capsys.readouterr().err


@pytest.mark.parametrize("name", BODIES)
def test_each_body_is_usable_and_spins_about_its_greatest_moment(name):
    shape = read_shape(SHAPES / name)
    assert check_shape(shape) == []
    told = describe(shape)
    assert told["spin_tilt_deg"] < 3.0
    assert told["handles"] == 0
    assert told["smallest_angle_deg"] > 14.0
    assert (SHAPES / name).stat().st_size < 200_000


def test_the_catalogue_holds_these_bodies_and_no_others():
    assert sorted(p.name for p in SHAPES.iterdir() if p.suffix in (".obj", ".tab", ".stl", ".ply")) == BODIES
