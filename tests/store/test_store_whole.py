"""Files appear whole or not at all: killed, interrupted, without room, without leave."""

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from smallbody.errors import StoreError
from smallbody.store.whole import TEMPORARY, LatchedFile, commit


def run(code: str, *arguments: object, **how) -> subprocess.CompletedProcess:
    return subprocess.run([sys.executable, "-c", code, *map(str, arguments)], capture_output=True, text=True, **how)


def test_a_committed_file_holds_what_was_given_and_nothing_else_is_left(tmp_path):
    commit(tmp_path / "a.bin", b"one")
    commit(tmp_path / "a.bin", lambda file: file.write(b"two") and None)
    assert (tmp_path / "a.bin").read_bytes() == b"two"
    assert os.listdir(tmp_path) == ["a.bin"]


def test_a_committed_file_may_be_read_by_those_whom_the_mask_allows(tmp_path):
    mask = os.umask(0o022)
    try:
        commit(tmp_path / "a.bin", b"one")
    finally:
        os.umask(mask)
    assert (tmp_path / "a.bin").stat().st_mode & 0o777 == 0o644


def test_a_link_is_followed_and_stays_a_link(tmp_path):
    (tmp_path / "there").mkdir()
    (tmp_path / "link.bin").symlink_to(tmp_path / "there" / "a.bin")
    commit(tmp_path / "link.bin", b"one")
    assert (tmp_path / "link.bin").is_symlink()
    assert (tmp_path / "there" / "a.bin").read_bytes() == b"one"


def test_of_two_writers_who_may_not_replace_the_second_is_refused(tmp_path):
    commit(tmp_path / "a.bin", b"one", replace=False)
    with pytest.raises(StoreError, match="another run wrote it first"):
        commit(tmp_path / "a.bin", b"two", replace=False)
    assert (tmp_path / "a.bin").read_bytes() == b"one"
    assert os.listdir(tmp_path) == ["a.bin"]


def test_on_a_file_system_without_hard_links_the_file_is_renamed_and_never_replaced(tmp_path, monkeypatch):
    def no_links(*_):
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", no_links)
    commit(tmp_path / "a.bin", b"one", replace=False)
    with pytest.raises(StoreError, match="another run wrote it first"):
        commit(tmp_path / "a.bin", b"two", replace=False)
    assert (tmp_path / "a.bin").read_bytes() == b"one"
    assert os.listdir(tmp_path) == ["a.bin"]


@pytest.mark.parametrize(("where", "words"), [
    ("nowhere/a.h5", "there is no folder"),
    ("plain/a.h5", "Not a directory"),
    ("folder", "not a plain file"),
    ("x" * 300, "File name too long"),
])  # fmt: skip
def test_a_place_where_nothing_can_be_written_is_named_in_one_line(tmp_path, where, words):
    (tmp_path / "plain").write_text("")
    (tmp_path / "folder").mkdir()
    with pytest.raises(StoreError, match=words) as caught:
        commit(tmp_path / where, b"one")
    assert str(tmp_path) in str(caught.value)
    assert "\n" not in str(caught.value)
    assert sorted(os.listdir(tmp_path)) == ["folder", "plain"]


def test_a_device_is_not_replaced_by_a_file():
    with pytest.raises(StoreError, match="not a plain file"):
        commit("/dev/null", b"one")
    assert not Path("/dev/null").is_file()


AS_NOBODY = """
import os, sys
from smallbody.store.whole import commit
if os.getuid() == 0:
    os.setgid(65534); os.setuid(65534)
try:
    commit(sys.argv[1], b"one")
except Exception as error:
    print(type(error).__name__, error)
"""


def test_a_folder_that_may_not_be_written_is_an_error(tmp_path):
    closed = tmp_path / "closed"
    closed.mkdir()
    for folder in [closed, tmp_path, *tmp_path.parents[:-2]]:  # so that someone else may look into it
        if folder.owner() == closed.owner():
            folder.chmod(0o555 if folder == closed else folder.stat().st_mode | 0o055)
    done = run(AS_NOBODY, closed / "a.bin")
    assert done.stdout.startswith("StoreError cannot write"), done
    assert "Permission denied" in done.stdout
    assert os.listdir(closed) == []


SMALL_DISK = """
import resource, sys
resource.setrlimit(resource.RLIMIT_FSIZE, (100_000, 100_000))   # stands in for the full disk
from smallbody.store.whole import commit
try:
    through = lambda file: [file.write(bytes(1000)) for _ in range(200)]
    commit(sys.argv[1], bytes(200_000) if sys.argv[2] == "bytes" else through)
except Exception as error:
    print(type(error).__name__, error)
"""


@pytest.mark.parametrize("way", ["bytes", "through"])
def test_without_room_the_old_file_stays_and_no_temporary_is_left(tmp_path, way):
    (tmp_path / "a.bin").write_bytes(b"old")
    done = run(SMALL_DISK, tmp_path / "a.bin", way)
    assert done.stdout.startswith(f"StoreError cannot write {tmp_path}/a.bin: File too large"), done
    assert (tmp_path / "a.bin").read_bytes() == b"old"
    assert os.listdir(tmp_path) == ["a.bin"]


class Full:
    """A raw file on a disk with so much room."""

    def __init__(self, room: int) -> None:
        self.room = room
        self.held = b""

    def write(self, data) -> int:
        if len(self.held) == self.room:
            raise OSError(28, "No space left on device")
        taken = bytes(data[: self.room - len(self.held)])  # what is still possible, as the system does
        self.held += taken
        return len(taken)


def test_a_latched_file_keeps_the_first_error_and_says_nothing_to_its_writer():
    file = LatchedFile(Full(10))
    assert [file.write(b"12345") for _ in range(4)] == [5, 5, 5, 5]
    assert file.raw.held == b"1234512345"
    with pytest.raises(OSError, match="No space left"):
        file.check()


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no such device here")
def test_a_latched_file_on_a_full_device_keeps_the_error():
    with open("/dev/full", "r+b", buffering=0) as raw:
        file = LatchedFile(raw)
        assert file.write(bytes(100)) == 100
        assert file.error.errno == 28


KEEP_WRITING = """
import sys
from smallbody.store.whole import commit
print("ready", flush=True)
for i in range(100000):
    commit(sys.argv[1], bytes([i % 256]) * 300_000)
"""


def test_a_writer_killed_at_any_moment_leaves_a_whole_file(tmp_path):
    path, draw = tmp_path / "a.bin", random.Random(5)
    for _ in range(8):
        writer = subprocess.Popen([sys.executable, "-c", KEEP_WRITING, path], stdout=subprocess.PIPE)
        writer.stdout.readline()
        time.sleep(draw.uniform(0.01, 0.1))
        writer.kill()
        writer.communicate()
        if path.exists():
            held = path.read_bytes()
            assert held == held[:1] * 300_000
    assert path.exists()
    assert all(name == "a.bin" or name.endswith(TEMPORARY) for name in os.listdir(tmp_path))


STOPPED = """
import sys, time
from smallbody.store.whole import commit
def slowly(file):
    print("ready", flush=True)
    for _ in range(1000):
        file.write(bytes(1000))
        file.check()
        time.sleep(0.005)
    print("not stopped", flush=True)
try:
    commit(sys.argv[1], slowly)
except KeyboardInterrupt:
    print("stopped")
"""


def test_interrupting_a_long_write_leaves_the_old_file_and_no_temporary(tmp_path):
    (tmp_path / "a.bin").write_bytes(b"old")
    writer = subprocess.Popen([sys.executable, "-c", STOPPED, tmp_path / "a.bin"], stdout=subprocess.PIPE, text=True)
    writer.stdout.readline()
    writer.send_signal(signal.SIGINT)
    assert writer.communicate(timeout=20)[0] == "stopped\n"
    assert (tmp_path / "a.bin").read_bytes() == b"old"
    assert os.listdir(tmp_path) == ["a.bin"]
