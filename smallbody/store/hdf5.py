"""Quantities to HDF5 and back: a dataset each, in the root, with every axis named by a dimension scale.

Layout 1. Root attributes: `layout` (whole number), `kind` (text), and whatever the result says of itself (text, whole
numbers, floats). Every quantity is a dataset with `units` (unless it is text) and `long_name`. Every axis has a scale
of the axis' name, either a quantity (a coordinate) or the whole numbers from 0. Text is of variable length, UTF-8.
The format is HDF5's default, with filters that every build of it has: any reader of HDF5 or netCDF-4 will do.

After the end that HDF5 knows of comes a seal, the SHA-256 of all before it. HDF5 takes no notice of it, but it can
crash or hang on a damaged file, or give back changed numbers without a word. A program that edits the file cuts the
seal off.
"""

from __future__ import annotations

import hashlib
import io
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, BinaryIO

import h5py
import numpy as np

from smallbody.errors import SizeMismatch, StoreError
from smallbody.quantity import Quantity
from smallbody.store.whole import LatchedFile, commit

LAYOUT = 1
CHUNK_BYTES = 128 * 1024  # measured to be a good compromise between reading rows and reading columns
SEAL = b"\nsmallbody seal sha256 "
SEAL_BYTES = len(SEAL) + 65  # with the hash in hexadecimal and a line end
IN_MEMORY_BYTES = 256 * 1024**2  # above this the file is not made in memory first


@dataclass(frozen=True)
class Stored:
    """What a file holds.

    kind : "drift", "sweep", ...: which quantities to expect
    arrays : Quantity by name, in the order of the file
    attrs : what the result says of itself: inputs, versions, hash of the shape, ...
    """

    kind: str
    arrays: Mapping[str, Quantity]
    attrs: Mapping[str, Any] = field(default_factory=dict)

    @property
    def name(self) -> str:
        """Name of the body."""
        return str(self.attrs.get("name", ""))


def hdf5_versions() -> dict[str, str]:
    """Versions of what writes the files."""
    return {"h5py": h5py.version.version, "hdf5": h5py.version.hdf5_version}


def axes_of(arrays: Mapping[str, Quantity]) -> dict[str, int]:
    """Length of every axis, in the order in which they are met.

    raises : SizeMismatch, if an axis has two lengths, is met twice in one quantity, is empty, or shares its name with a
        quantity that is not its coordinate
    """
    lengths: dict[str, int] = {}
    for name, quantity in arrays.items():
        if len(set(quantity.dims)) < len(quantity.dims):
            raise SizeMismatch(f"{name} names an axis twice: {quantity.dims}; give the second a name of its own")
        for axis, length in zip(quantity.dims, np.shape(quantity.values)):
            if lengths.setdefault(axis, length) != length:
                raise SizeMismatch(f"axis {axis} is {length} long in {name} and {lengths[axis]} elsewhere")
            if length == 0:
                raise SizeMismatch(f"axis {axis} of {name} is empty")
    for axis in lengths:
        if axis in arrays and arrays[axis].dims != (axis,):
            raise SizeMismatch(f"{axis} is an axis and a quantity along {arrays[axis].dims}; rename one of them")
    return lengths


def write(stored: Stored, path: Path | str, *, replace: bool = True, compress: bool = True) -> None:
    """Write the file, whole or not at all.

    raises : StoreError, if it cannot be written; SizeMismatch, if the quantities do not fit together
    """
    if sum(np.asarray(q.values).nbytes for q in stored.arrays.values()) <= IN_MEMORY_BYTES:
        commit(path, image(stored, compress=compress), replace=replace)
    else:
        commit(path, lambda file: _encode(stored, file, compress), replace=replace)


def image(stored: Stored, *, compress: bool = True) -> bytes:
    """The bytes of the file; the same quantities and attributes give the same bytes."""
    buffer = io.BytesIO()
    _encode(stored, buffer, compress)
    return buffer.getvalue()


def _encode(stored: Stored, target: io.BytesIO | LatchedFile, compress: bool) -> None:
    def check() -> None:
        if isinstance(target, LatchedFile):
            target.check()

    lengths = axes_of(stored.arrays)
    scales = {
        axis: stored.arrays.get(
            axis, Quantity(np.arange(n, dtype=np.int32), (axis,), "1", f"number of the {axis}, from 0")
        )
        for axis, n in lengths.items()
    }
    with h5py.File(target, "w", track_order=True) as file:
        for name, value in {"layout": LAYOUT, "kind": stored.kind, **stored.attrs}.items():
            file.attrs[name] = value
        for name, quantity in {**scales, **stored.arrays}.items():
            dataset = _put(file, name, quantity, compress)
            if name in scales:
                dataset.make_scale(name)
            check()
        for name, quantity in stored.arrays.items():
            if name not in scales:
                for i, axis in enumerate(quantity.dims):
                    file[name].dims[i].attach_scale(file[axis])
    check()
    target.seek(0)
    seal = _seal(target)
    target.seek(0, 2)
    target.write(seal)


def _seal(file: io.BytesIO | BinaryIO | LatchedFile, length: int | None = None) -> bytes:
    """The seal of the first `length` bytes of a file, or of all that follow."""
    digest, block = hashlib.sha256(), memoryview(bytearray(1 << 20))
    while got := file.readinto(block[: len(block) if length is None else min(len(block), length)]):  # type: ignore[union-attr]
        digest.update(block[:got])
        length = None if length is None else length - got
    return SEAL + digest.hexdigest().encode() + b"\n"


def _unbroken(path: Path) -> bool:
    """Whether the seal fits; true also of a file without one."""
    with path.open("rb") as file:
        length = file.seek(0, 2) - SEAL_BYTES
        if length <= 0:
            return True
        file.seek(length)
        seal = file.read()
        file.seek(0)
        return not seal.startswith(SEAL) or seal == _seal(file, length)


def _put(file: h5py.File, name: str, quantity: Quantity, compress: bool) -> h5py.Dataset:
    values = np.asarray(quantity.values)
    if values.dtype.kind in "OUT":
        dataset = file.create_dataset(name, data=values.astype(object), dtype=h5py.string_dtype())
    else:
        values = values.astype(np.int8) if values.dtype.kind == "b" else values
        how: dict[str, Any] = {}
        if compress and values.nbytes > CHUNK_BYTES:
            how = {"chunks": _chunks(values), "compression": "gzip", "compression_opts": 1, "shuffle": True}
        dataset = file.create_dataset(name, data=values, **how)
        dataset.attrs["units"] = quantity.units
    dataset.attrs["long_name"] = quantity.about
    return dataset


def _chunks(values: np.ndarray) -> tuple[int, ...]:
    """Whole rows as far as they fit, the last axes first."""
    room, chunks = max(1, CHUNK_BYTES // values.itemsize), []
    for length in reversed(values.shape):
        chunks.append(min(length, room))
        room = max(1, room // length)
    return tuple(reversed(chunks))


def load(path: Path | str) -> Stored:
    """Read a result.

    path : file that `save` wrote
    raises : StoreError, if there is no such file, or it is not one of ours, damaged, or of a newer layout
    """
    path = Path(path)
    if path.is_dir():
        raise StoreError(f"{path} is a folder; give the file of a result")
    if not path.exists():
        parts = path.with_name(path.name + ".parts")
        hint = f"; an unfinished run is in {parts}: the command that began it goes on with it" if parts.is_dir() else ""
        raise StoreError(f"there is no file {path}{hint}")
    try:
        unbroken = _unbroken(path)
    except OSError as error:
        raise StoreError(f"cannot read {path}: {error.strerror or error}") from error
    if not h5py.is_hdf5(str(path)):
        raise StoreError(f"{path} is not an HDF5 file")
    if not unbroken:
        raise StoreError(f"{path} is damaged: it has changed since it was written")
    try:
        with h5py.File(path, "r", locking=False) as file:
            attrs = {name: _plain(value) for name, value in file.attrs.items()}
            layout, kind = attrs.pop("layout", None), attrs.pop("kind", None)
            if not isinstance(layout, int) or not isinstance(kind, str):
                raise StoreError(
                    f"{path} is an HDF5 file, but not a result of smallbody (it does not say its layout and kind)"
                )
            if layout > LAYOUT:
                raise StoreError(
                    f"{path} has layout {layout}, newer than {LAYOUT}, the newest this version reads; update smallbody"
                )
            return Stored(kind, {name: _get(file[name]) for name in file}, attrs)
    except StoreError:
        raise
    except Exception as error:  # h5py raises nearly every kind of error on a damaged file
        raise StoreError(f"{path} is damaged or cut short: {' '.join(str(error).split())}") from error


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value


def _get(dataset: h5py.Dataset) -> Quantity:
    text = h5py.check_string_dtype(dataset.dtype) is not None
    values = dataset.asstr()[()] if text else dataset[()]
    if dataset.is_scale:
        dims: tuple[str, ...] = (dataset.name.lstrip("/"),)
    else:
        dims = tuple(dataset.dims[i][0].name.lstrip("/") for i in range(dataset.ndim))
    return Quantity(values, dims, str(dataset.attrs.get("units", "")), str(dataset.attrs.get("long_name", "")))
