"""A run in progress survives being stopped, shared, filled up and mixed up."""

import json
import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from smallbody.errors import StoreError
from smallbody.quantity import Quantity
from smallbody.store import Parts, Stored, image, joined, load, peek
from smallbody.store import parts as inside

PLAN = {"kind": "trial", "values": [1.0, 2.5], "body": {"name": "pebble", "surface": {"thermal_inertia": 200.0}}}


def rows(*numbers: int) -> dict[str, Quantity]:
    n = np.array(numbers)
    return {
        "cell": Quantity(n, ("cell",), "1", "number of the cell"),
        "x": Quantity(np.sin(n)[:, None] * [1, 2], ("cell", "k"), "m", "some result"),
        "error": Quantity(np.array([f"fault {i}" if i % 3 == 0 else "" for i in n], object), ("cell",), "", "fault"),
        "constant": Quantity(np.array([7.0, 8.0]), ("k",), "s", "the same in all"),
    }


def numbers(parts: Parts) -> list[int]:
    return [int(i) for segment in parts.read() for i in segment.arrays["cell"].values]


def test_what_is_kept_is_there_when_the_run_is_taken_up_again(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        parts.keep(rows(0, 1))
        parts.keep(rows(4))
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        assert numbers(parts) == [0, 1, 4]
        parts.keep(rows(2))
        assert [p.name for p in parts.segments()] == ["seg-000000.h5", "seg-000001.h5", "seg-000002.h5"]


def test_the_order_of_the_segments_leaves_no_trace_in_the_finished_file(tmp_path):
    made = []
    for cut in ([[0, 1, 2, 3, 4, 5, 6]], [[3], [6, 0], [1, 2, 5], [4]], [[6], [5], [4], [3], [2], [1], [0]]):
        with Parts(tmp_path / "r.parts", PLAN) as parts:
            for block in cut:
                parts.keep(rows(*block))
            parts.finish(Stored("table", joined(parts.read(), "cell"), {"name": "x"}), tmp_path / "r.h5")
        made.append((tmp_path / "r.h5").read_bytes())
        assert os.listdir(tmp_path) == ["r.h5"]
    assert made[0] == made[1] == made[2] == image(Stored("table", rows(*range(7)), {"name": "x"}))


def test_another_plan_is_refused_and_the_difference_named(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        parts.keep(rows(0))
    other = json.loads(json.dumps(PLAN))
    other["body"]["surface"]["thermal_inertia"] = 50.0
    with pytest.raises(StoreError, match=r"body.surface.thermal_inertia was 200.0, now 50.0") as caught, \
            Parts(tmp_path / "r.parts", other):  # fmt: skip
        pass
    assert "\n" not in str(caught.value)
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        assert numbers(parts) == [0]


def test_a_segment_of_another_plan_is_refused(tmp_path):
    for name, plan in (("a.parts", PLAN), ("b.parts", {"kind": "other"})):
        with Parts(tmp_path / name, plan) as parts:
            parts.keep(rows(0))
    (tmp_path / "b.parts" / "seg-000000.h5").rename(tmp_path / "a.parts" / "seg-000001.h5")
    with Parts(tmp_path / "a.parts", PLAN) as parts, pytest.raises(StoreError, match="belongs to another plan"):
        parts.read()


def test_segments_without_their_plan_are_refused(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        parts.keep(rows(0))
    (tmp_path / "r.parts" / "plan.json").unlink()
    with pytest.raises(StoreError, match="no plan"), Parts(tmp_path / "r.parts", PLAN):
        pass


def test_leftover_temporaries_are_swept_and_nothing_else(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        parts.keep(rows(0))
    (tmp_path / "r.parts" / ".seg-000001.h5.12ab34cd.writing").write_bytes(b"half a seg")
    (tmp_path / "r.parts" / "notes.txt").write_text("mine")
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        assert sorted(os.listdir(parts.folder)) == ["lock", "notes.txt", "plan.json", "seg-000000.h5"]
        parts.finish(Stored("table", {}, {}), tmp_path / "r.h5")
    assert os.listdir(tmp_path / "r.parts") == ["notes.txt"]  # what is not ours is not removed


def test_a_missing_segment_leaves_the_others_and_its_number_is_not_given_again_in_the_middle(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        for i in range(4):
            parts.keep(rows(i))
        (parts.folder / "seg-000001.h5").unlink()
        assert numbers(parts) == [0, 2, 3]
        parts.keep(rows(1))
        assert [p.name[4:10] for p in parts.segments()] == ["000000", "000002", "000003", "000004"]


def test_a_damaged_segment_is_named_with_what_to_do(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        parts.keep(rows(0))
        segment = parts.segments()[0]
        segment.write_bytes(segment.read_bytes()[:-300])
        with pytest.raises(StoreError, match=r"seg-000000.h5 is damaged.*remove it"):
            parts.read()


HOLD = """
import sys, time
sys.path.insert(0, sys.argv[1])
from test_store_parts import Parts, PLAN
with Parts(sys.argv[2], PLAN):
    print("held", flush=True)
    time.sleep(60)
"""


def test_two_processes_do_not_share_a_run_and_a_dead_one_does_not_hold_it(tmp_path):
    arguments = [sys.executable, "-c", HOLD, str(Path(__file__).parent), str(tmp_path / "r.parts")]
    holder = subprocess.Popen(arguments, stdout=subprocess.PIPE, text=True)
    assert holder.stdout.readline() == "held\n"
    with pytest.raises(StoreError, match=f"in use by process {holder.pid} on .* since 20"), \
            Parts(tmp_path / "r.parts", PLAN):  # fmt: skip
        pass
    holder.kill()
    holder.communicate()
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        assert parts.segments() == []


def test_one_process_does_not_take_a_run_twice(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN), pytest.raises(StoreError, match="this very process"), \
            Parts(tmp_path / "r.parts", PLAN):  # fmt: skip
        pass
    with Parts(tmp_path / "r.parts", PLAN):
        pass


def test_a_place_for_no_run_is_told(tmp_path):
    (tmp_path / "plain").write_text("")
    for place, words in (("no/r.parts", "there is no folder"), ("plain", "cannot make the folder"),
                         ("plain/r.parts", "cannot make the folder")):  # fmt: skip
        with pytest.raises(StoreError, match=words), Parts(tmp_path / place, PLAN):
            pass


def test_a_full_disk_is_waited_for_then_told_and_the_run_goes_on_later(tmp_path, monkeypatch):
    waited, real = [], inside.write

    def full(*_, **__):
        raise StoreError("cannot write: No space left on device")

    def wait(seconds):
        waited.append(seconds)
        if len(waited) == 4:
            monkeypatch.setattr(inside, "write", real)

    monkeypatch.setattr(inside.time, "sleep", wait)
    with Parts(tmp_path / "r.parts", PLAN, pauses_s=(1.0, 2.0)) as parts:
        monkeypatch.setattr(inside, "write", full)
        with pytest.raises(StoreError, match="No space left"):
            parts.keep(rows(0))
        parts.keep(rows(1))
        assert waited == [1.0, 2.0, 1.0, 2.0]
        assert numbers(parts) == [1]


SMALL_DISK = """
import resource, sys
resource.setrlimit(resource.RLIMIT_FSIZE, (5000, 5000))   # room for the plan, not for a segment
sys.path.insert(0, sys.argv[1])
from test_store_parts import Parts, PLAN, rows
with Parts(sys.argv[2], PLAN, pauses_s=()) as parts:
    parts.keep(rows(*range(1000)))
"""


def test_without_room_no_half_segment_is_left(tmp_path):
    arguments = [sys.executable, "-c", SMALL_DISK, str(Path(__file__).parent), str(tmp_path / "r.parts")]
    done = subprocess.run(arguments, capture_output=True, text=True)
    assert done.returncode == 1  # the error itself, not a crash inside HDF5
    assert "StoreError: cannot write" in done.stderr
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        assert parts.segments() == []


KEEP_ON = """
import sys
sys.path.insert(0, sys.argv[1])
from test_store_parts import Parts, PLAN, numbers, rows
with Parts(sys.argv[2], PLAN) as parts:
    print("ready", flush=True)
    done = set(numbers(parts))
    for i in range(200):
        if i not in done:
            parts.keep(rows(i))
"""


def test_a_run_killed_again_and_again_ends_with_the_same_bytes(tmp_path):
    draw, kills = random.Random(2), 0
    arguments = [sys.executable, "-c", KEEP_ON, str(Path(__file__).parent), str(tmp_path / "r.parts")]
    while True:
        run = subprocess.Popen(arguments, stdout=subprocess.PIPE, text=True)
        run.stdout.readline()
        if kills < 5:
            time.sleep(draw.uniform(0.01, 0.15))
            run.send_signal(signal.SIGKILL)
        if run.wait() == 0:
            break
        kills += 1
        run.stdout.close()
    assert kills > 0
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        assert sorted(numbers(parts)) == list(range(200))  # none twice, none missing
        parts.finish(Stored("table", joined(parts.read(), "cell"), {}), tmp_path / "r.h5")
    assert (tmp_path / "r.h5").read_bytes() == image(Stored("table", rows(*range(200)), {}))


def test_onlookers_see_what_is_done_while_the_run_is_held(tmp_path):
    with Parts(tmp_path / "r.parts", PLAN) as parts:
        parts.keep(rows(0, 1))
        plan, segments = peek(tmp_path / "r.parts")
        assert plan == PLAN
        assert list(segments[0].arrays["cell"].values) == [0, 1]
    with pytest.raises(StoreError, match="not the folder of an unfinished run"):
        peek(tmp_path)
    with pytest.raises(StoreError, match="is a folder"):
        load(tmp_path / "r.parts")
