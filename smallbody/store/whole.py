"""Files that appear whole or not at all: a temporary in the same folder, flushed to the disk, then given its name."""

from __future__ import annotations

import os
import secrets
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from pathlib import Path
from typing import BinaryIO

from smallbody.errors import StoreError

TEMPORARY = ".writing"  # what the name of every temporary ends in, so that leftovers can be told and swept


class LatchedFile:
    """A file that, to HDF5, never fails: the first error is kept in `error`, and what is written after it goes nowhere.

    HDF5 crashes the process when a write under an open handle fails (a full disk is enough), so it is never told;
    whoever handed it the file looks at `error` between datasets and at the end.
    """

    def __init__(self, raw: BinaryIO) -> None:
        self.raw = raw
        self.error: BaseException | None = None

    def latch(self, error: BaseException) -> None:
        """Keep `error` if it is the first."""
        self.error = self.error or error

    def check(self) -> None:
        """Raise the first error, if there was one."""
        if self.error is not None:
            raise self.error

    def seek(self, offset: int, whence: int = 0) -> int:
        return self.raw.seek(offset, whence)

    def tell(self) -> int:
        return self.raw.tell()

    def read(self, size: int = -1) -> bytes:
        return self.raw.read(size)

    def readinto(self, buffer: memoryview) -> int:
        try:
            return self.raw.readinto(buffer)  # type: ignore[attr-defined, no-any-return]
        except OSError as error:
            self.latch(error)
            return 0

    def write(self, data: bytes | memoryview) -> int:
        rest = memoryview(data).cast("B")
        while len(rest) and self.error is None:
            try:
                rest = rest[self.raw.write(rest) :]
            except OSError as error:
                self.latch(error)
        return len(data)

    def truncate(self, size: int | None = None) -> int:
        if self.error is None:
            try:
                self.raw.truncate(size)
            except OSError as error:
                self.latch(error)
        return size or 0

    def flush(self) -> None:
        """Nothing is held back; the disk is asked once, at the end."""


def commit(path: Path | str, content: bytes | Callable[[LatchedFile], None], *, replace: bool = True) -> None:
    """Write `content` to `path`: a reader at any moment finds what was there before, or all of the new file.

    path : where to; a link is followed
    content : bytes, or a function that writes to the file it is handed (for what is too large to hold in memory)
    replace : whether a file of that name may be there already; if not, of two writers one is refused
    raises : StoreError, when the file cannot be written; nothing is left behind
    source : common practice (write, fsync, link or rename, fsync the folder)
    """
    target = Path(os.path.realpath(path))
    temporary = target.with_name(f".{target.name[:200]}.{secrets.token_hex(4)}{TEMPORARY}")
    try:
        if target.exists() and not target.is_file():
            raise StoreError(f"cannot write {path}: there is something of that name that is not a plain file")
        # 0o666 less the user's mask, as for any file a program makes; tempfile would make it private
        handle = os.open(temporary, os.O_CREAT | os.O_EXCL | os.O_RDWR | getattr(os, "O_BINARY", 0), 0o666)
        try:
            with os.fdopen(handle, "w+b", buffering=0) as raw:
                _fill(LatchedFile(raw), content)
                os.fsync(handle)
            if replace:
                os.replace(temporary, target)
            else:
                _link(temporary, target)
        finally:
            with suppress(OSError):
                os.unlink(temporary)
        _sync_folder(target.parent)
    except OSError as error:
        raise StoreError(f"cannot write {path}: {_reason(error, target)}") from error


def _reason(error: OSError, target: Path) -> str:
    if isinstance(error, FileNotFoundError) and not target.parent.exists():
        return f"there is no folder {target.parent}"
    if isinstance(error, FileExistsError):
        return "another run wrote it first"
    return error.strerror or str(error)


def _fill(file: LatchedFile, content: bytes | Callable[[LatchedFile], None]) -> None:
    if not callable(content):
        file.write(content)
        file.check()
        return
    # Ctrl-C reaches the main thread only: writing in another keeps it from landing inside an HDF5 call
    with ThreadPoolExecutor(1) as pool:
        work = pool.submit(content, file)
        try:
            work.result()
        except BaseException as error:
            file.latch(error)  # the writer sees it at its next check, and the pool waits for that
            file.check()
    file.check()


def _link(temporary: Path, target: Path) -> None:
    try:
        os.link(temporary, target)
    except FileExistsError:
        raise
    except OSError:  # a file system without hard links: under the run's lock nobody else is writing
        if target.exists():
            raise FileExistsError(target) from None
        os.rename(temporary, target)


def _sync_folder(folder: Path) -> None:
    if os.name == "nt":
        return  # there a folder cannot be opened
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    except OSError:
        pass  # some network file systems refuse; the file itself is safe
    finally:
        os.close(handle)
