"""The archive: results in HDF5 files that appear whole or not at all, and runs that survive being stopped."""

from __future__ import annotations

import json
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

from smallbody.body import Body
from smallbody.store.hdf5 import LAYOUT, Stored, hdf5_versions, image, load, write
from smallbody.store.parts import Parts, joined, peek, plan_hash
from smallbody.store.whole import commit

if TYPE_CHECKING:
    from smallbody.push import Drift

__all__ = [
    "LAYOUT",
    "Parts",
    "Storable",
    "Stored",
    "commit",
    "image",
    "joined",
    "load",
    "peek",
    "plan_hash",
    "save",
    "write",
]


class Storable(Protocol):
    """A result that can turn itself into what a file holds."""

    def stored(self) -> Stored: ...


def save(result: Drift | Storable | Stored, path: Path | str) -> None:
    """Write a result to an HDF5 file, whole or not at all; a file of that name is replaced.

    result : what `drift`, `sweep` or `load` gave
    raises : StoreError, if it cannot be written; nothing is left behind
    """
    if isinstance(result, Stored):
        write(result, path)
    else:
        write(result.stored() if hasattr(result, "stored") else _of_drift(result), path)


def _of_drift(result: Drift) -> Stored:
    attrs = {
        "name": result.name,
        "body_toml": Body(**result.provenance["body"]).to_toml(),
        "shape_sha256": result.provenance["shape_sha256"],
        "versions": json.dumps({**result.provenance["versions"], **hdf5_versions()}),
        "result_json": json.dumps(result.to_dict(), allow_nan=False),
        "created_utc": datetime.now(UTC).isoformat(timespec="seconds"),
    }
    return Stored("drift", result.arrays, attrs)
