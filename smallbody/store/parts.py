"""A run in progress: a folder of small files that never change, one lock, and the plan they all belong to.

HDF5 files that grow in place do not survive kills and full disks, so nothing here grows: each segment is committed
whole, and what counts as done is what the folder holds.
"""

from __future__ import annotations

import hashlib
import json
import os
import re
import socket
import time
from collections.abc import Mapping
from contextlib import suppress
from datetime import UTC, datetime
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np

from smallbody.errors import StoreError
from smallbody.quantity import Quantity
from smallbody.store.hdf5 import Stored, load, write
from smallbody.store.whole import TEMPORARY, commit

_held: set[Path] = set()  # the system's locks do not keep one process from itself


class Parts:
    """The segments of one run, to be used as a context: `with Parts(folder, plan) as parts`. One process at a time.

    folder : made if it is not there
    plan : what the run is to compute, JSON-able; a folder that was begun with another plan is refused
    pauses_s : how long to wait before each further try when a segment cannot be written
    raises : StoreError on entry, if the folder cannot be made, is in use, or belongs to another plan
    """

    def __init__(
        self, folder: Path | str, plan: Mapping[str, Any], *, pauses_s: tuple[float, ...] = (0.5, 2.0)
    ) -> None:
        self.folder = Path(os.path.realpath(folder))
        self.plan = json.loads(json.dumps(plan))
        self.plan_sha256 = plan_hash(self.plan)
        self.pauses_s = pauses_s
        self._lock: int | None = None

    def __enter__(self) -> Parts:
        try:
            self.folder.mkdir(exist_ok=True)
        except OSError as error:
            where = (
                f"there is no folder {self.folder.parent}" if isinstance(error, FileNotFoundError) else error.strerror
            )
            raise StoreError(f"cannot make the folder {self.folder}: {where}") from error
        self._take_lock()
        try:
            for leftover in self.folder.glob(f".*{TEMPORARY}"):
                leftover.unlink()
            self._agree()
        except BaseException:
            self._drop_lock()
            raise
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, tb: TracebackType | None) -> None:
        self._drop_lock()

    # the lock

    def _take_lock(self) -> None:
        try:
            import fcntl
        except ImportError:  # pragma: no cover
            raise StoreError("runs that can be resumed need a system with POSIX file locks") from None
        if self.folder in _held:
            raise StoreError(f"{self.folder} is in use by this very process")
        path = self.folder / "lock"
        while True:
            try:
                lock = os.open(path, os.O_CREAT | os.O_RDWR, 0o666)
            except FileNotFoundError:  # whoever finished the run removed the folder between our two steps
                self.folder.mkdir(exist_ok=True)
                continue
            except OSError as error:
                raise StoreError(f"cannot lock {self.folder}: {error.strerror}") from error
            try:
                fcntl.lockf(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
            except OSError as error:
                holder = os.read(lock, 1000).decode(errors="replace").strip()
                os.close(lock)
                if isinstance(error, BlockingIOError | PermissionError):
                    raise StoreError(f"{self.folder} is in use{f' by {holder}' if holder else ''}") from error
                raise StoreError(f"cannot lock {self.folder}: {error.strerror}") from error
            # a lock on a file that its last holder removed meanwhile locks nothing
            with suppress(FileNotFoundError):
                if os.fstat(lock).st_ino == os.stat(path).st_ino:
                    break
            os.close(lock)
        self._lock = lock
        _held.add(self.folder)
        with suppress(OSError):  # the note for others is a courtesy; the lock is held without it
            os.ftruncate(lock, 0)
            since = datetime.now(UTC).isoformat(timespec="seconds")
            os.write(lock, f"process {os.getpid()} on {socket.gethostname()} since {since}".encode())

    def _drop_lock(self) -> None:
        if self._lock is not None:
            os.close(self._lock)
            self._lock = None
            _held.discard(self.folder)

    # the plan

    def _agree(self) -> None:
        path = self.folder / "plan.json"
        try:
            begun = json.loads(path.read_text(encoding="utf-8"))
        except FileNotFoundError:
            if self.segments():
                raise StoreError(
                    f"{self.folder} holds segments but no plan; remove the folder to start again"
                ) from None
            commit(path, json.dumps(self.plan, indent=1).encode(), replace=False)
            return
        except (OSError, ValueError) as error:
            raise StoreError(f"cannot read {path}: {error}") from error
        if begun != self.plan:
            raise StoreError(
                f"{self.folder} was begun with another plan ({_difference(begun, self.plan)}); "
                "go on with that one, remove the folder, or write elsewhere"
            )

    # the segments

    def segments(self) -> list[Path]:
        """The committed segments, in order."""
        return _segments(self.folder)

    def keep(self, arrays: Mapping[str, Quantity]) -> None:
        """Commit the next segment: when this returns, it is on the disk.

        raises : StoreError, if it cannot be written after all tries; what was kept before stays
        """
        done = self.segments()
        number = int(done[-1].stem[4:]) + 1 if done else 0
        segment = Stored("segment", arrays, {"plan_sha256": self.plan_sha256})
        for pause in (*self.pauses_s, None):
            try:
                return write(segment, self.folder / f"seg-{number:06d}.h5", replace=False, compress=False)
            except StoreError:
                if pause is None:
                    raise
                time.sleep(pause)

    def read(self) -> list[Stored]:
        """All segments, in order.

        raises : StoreError, if one is damaged or of another plan
        """
        return [_segment(path, self.plan_sha256) for path in self.segments()]

    def finish(self, result: Stored, path: Path | str) -> None:
        """Write the one file, then remove the folder.

        raises : StoreError, if the file cannot be written; then the folder stays
        """
        write(result, path)
        self.remove()

    def remove(self) -> None:
        """Remove the run's own files, and the folder if nothing else is in it."""
        # segments first: a folder with segments always has a plan, whenever this is cut short
        for path in [*self.segments(), self.folder / "plan.json", self.folder / "lock"]:
            path.unlink(missing_ok=True)
        with suppress(OSError):
            self.folder.rmdir()


def peek(folder: Path | str) -> tuple[dict[str, Any], list[Stored]]:
    """Plan and segments of a run in progress, for those who only look: takes no lock, changes nothing.

    raises : StoreError, if the folder is not that of a run, or a segment is damaged
    """
    folder = Path(folder)
    try:
        plan = json.loads((folder / "plan.json").read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise StoreError(f"{folder} is not the folder of an unfinished run (no readable plan.json)") from error
    return plan, [_segment(path, plan_hash(plan)) for path in _segments(folder)]


def plan_hash(plan: Mapping[str, Any]) -> str:
    """SHA-256 of a plan, whatever the order of its keys."""
    return hashlib.sha256(json.dumps(plan, sort_keys=True).encode()).hexdigest()


def _segments(folder: Path) -> list[Path]:
    found = [p for p in folder.iterdir() if re.fullmatch(r"seg-\d{6,}\.h5", p.name)]
    return sorted(found, key=lambda p: int(p.stem[4:]))


def _segment(path: Path, plan_sha256: str) -> Stored:
    try:
        segment = load(path)
    except StoreError as error:
        raise StoreError(f"{error}; remove it, and its part is computed again") from error
    if segment.attrs.get("plan_sha256") != plan_sha256:
        raise StoreError(f"{path} belongs to another plan; remove it")
    return segment


def joined(segments: list[Stored], along: str) -> dict[str, Quantity]:
    """The segments' quantities end to end along the axis `along`, sorted by the coordinate of that name.

    The order in which they were committed leaves no trace. Quantities without that axis are taken from the first.
    """
    if not segments:
        return {}
    order = np.argsort(np.concatenate([s.arrays[along].values for s in segments]), kind="stable")
    whole = {}
    for name, first in segments[0].arrays.items():
        if along in first.dims:
            axis = first.dims.index(along)
            values = np.concatenate([s.arrays[name].values for s in segments], axis=axis)
            whole[name] = Quantity(np.take(values, order, axis=axis), first.dims, first.units, first.about)
        else:
            whole[name] = first
    return whole


def _difference(old: Any, new: Any, where: str = "") -> str:
    """The first thing in which two plans differ, in words."""
    if isinstance(old, dict) and isinstance(new, dict):
        for key in [*old, *(k for k in new if k not in old)]:
            if old.get(key) != new.get(key):
                return _difference(old.get(key), new.get(key), f"{where}.{key}" if where else str(key))
    return f"{where or 'plan'} was {_short(old)}, now {_short(new)}"


def _short(value: Any) -> str:
    text = "not given" if value is None else json.dumps(value)
    return text if len(text) <= 60 else text[:57] + "..."
