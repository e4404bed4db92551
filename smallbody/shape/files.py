"""Shape files in and out: the format is told by the name, or by the content where the name says nothing."""

from __future__ import annotations

import os
import re
import stat
import tempfile
from pathlib import Path

import numpy as np

from smallbody.errors import ShapeError
from smallbody.shape.model import Shape
from smallbody.shape.obj import obj_bytes, parse_obj
from smallbody.shape.stlply import looks_like_stl, parse_ply, parse_stl, ply_bytes, stl_bytes
from smallbody.shape.table import parse_table, table_bytes

METRES = {"km": 1000.0, "m": 1.0}
FORMATS = {"obj": (".obj",), "table": (".tab", ".txt", ".tbl", ".dat"), "stl": (".stl",), "ply": (".ply",)}
_OBJ_STATEMENT = re.compile(rb"^[ \t]*(v|f|vn|vt|o|g|mtllib)[ \t]", re.MULTILINE)
LARGEST_FILE = 2 * 1024**3  # bytes; a shape of ten million facets is smaller


def read_shape(path: str | os.PathLike[str], length_unit: str = "km") -> Shape:
    """The surface in a file. It is read, not judged: `check_shape` says whether it can be used.

    path : file; .obj, .stl and .ply are what they say, under any other name the content tells (OBJ or a table, mostly)
    length_unit : "km" or "m", the unit of the file's coordinates
    raises : ShapeError, with file and line, for whatever cannot be read as a shape
    """
    metres = _metres(length_unit)
    data = _content(Path(path))
    return parse_shape(data, os.fspath(path)).scaled(metres)


def parse_shape(data: bytes, name: str) -> Shape:
    """The surface in the content of a file, in the file's own unit; see `read_shape`."""
    suffix = Path(name).suffix.lower()
    if suffix in FORMATS["obj"]:
        return parse_obj(data, name)
    if suffix in FORMATS["stl"]:
        return parse_stl(data, name)
    if suffix in FORMATS["ply"]:
        return parse_ply(data, name)
    if suffix not in FORMATS["table"]:
        if data.startswith((b"ply\n", b"ply\r")):
            return parse_ply(data, name)
        if looks_like_stl(data):
            return parse_stl(data, name)
    return parse_obj(data, name) if _OBJ_STATEMENT.search(data[:65_536]) else parse_table(data, name)


def write_shape(
    shape: Shape, path: str | os.PathLike[str], length_unit: str = "km", decimals: int | None = None
) -> None:
    """Writes a shape under its final name only once it is whole.

    path : .obj, .stl, .ply, or for a table .tab, .txt, .tbl, .dat
    length_unit : "km" or "m", the unit of the coordinates in the file
    decimals : coordinates are rounded to this many; None keeps all that float64 holds (STL: float32)

    raises : ShapeError, for a name that tells no format and a file that cannot be written
    """
    path = Path(path)
    data = shape_bytes(shape, path.suffix.lower(), length_unit, decimals)
    temporary = None
    try:
        handle, temporary = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        with os.fdopen(handle, "wb") as out:
            out.write(data)
            out.flush()
            os.fsync(out.fileno())
        os.chmod(temporary, 0o666 & ~_umask())
        os.replace(temporary, path)
        temporary = None
    except OSError as error:
        raise ShapeError(f"cannot write {path}: {error.strerror or error}") from error
    finally:
        if temporary is not None and os.path.exists(temporary):
            os.unlink(temporary)


def shape_bytes(shape: Shape, suffix: str, length_unit: str = "km", decimals: int | None = None) -> bytes:
    """The content of the file that `write_shape` writes under a name with this suffix."""
    coordinates = shape.vertices_m / _metres(length_unit)
    if decimals is not None:
        coordinates = np.round(coordinates, decimals) + 0.0  # no -0.0
    head = f"{len(shape.vertices_m)} vertices, {len(shape.facets)} facets, {length_unit}"
    for form, to_bytes in (("obj", obj_bytes), ("table", table_bytes), ("stl", stl_bytes), ("ply", ply_bytes)):
        if suffix in FORMATS[form]:
            return to_bytes(coordinates, shape.facets, head)
    raise ShapeError(
        f"no shape format goes by {suffix!r}; known are {', '.join(s for f in FORMATS.values() for s in f)}"
    )


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _metres(length_unit: str) -> float:
    if length_unit not in METRES:
        raise ShapeError(f'length_unit is "km" or "m", not {length_unit!r}')
    return METRES[length_unit]


def _content(path: Path) -> bytes:
    try:
        status = path.stat()
        if stat.S_ISDIR(status.st_mode):
            raise ShapeError(f"{path} is a folder, not a shape file")
        if not stat.S_ISREG(status.st_mode):
            raise ShapeError(f"{path} is not an ordinary file")
        if status.st_size > LARGEST_FILE:
            raise ShapeError(f"{path} is {status.st_size / 1e9:.1f} GB; at most {LARGEST_FILE / 1e9:.1f} GB are read")
        return path.read_bytes()
    except OSError as error:
        raise ShapeError(f"cannot read {path}: {error.strerror or error}") from error
    except ValueError as error:  # a NUL in the name
        raise ShapeError(f"cannot read {str(path)!r}: {error}") from error
