"""The cache of horizon tables: hits, damage, folders that cannot be written, two builders at once, its size."""

import errno
import os
import subprocess
import sys
import time
import warnings

import naive_light as naive
import numpy as np
import pytest

from smallbody.errors import Note
from smallbody.light import horizons, horizons_of

COLUMNS = 16


@pytest.fixture
def cache(tmp_path, monkeypatch):
    """An empty folder in which even quick tables are kept."""
    folder = tmp_path / "not yet" / "there"
    monkeypatch.setenv("SMALLBODY_CACHE", str(folder))
    monkeypatch.setattr(horizons, "WORTH_KEEPING_S", -1.0)
    return folder


@pytest.fixture
def built(monkeypatch):
    """How often a table was built."""
    calls = []
    plain = horizons._tabulate

    def counted(*arguments):
        calls.append(arguments)
        return plain(*arguments)

    monkeypatch.setattr(horizons, "_tabulate", counted)
    return calls


@pytest.fixture(scope="module")
def shape():
    return naive.jagged(80, seed=3)


def quietly(*arguments, **choices):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        return horizons_of(*arguments, **choices)


def test_a_table_is_built_once_and_read_back_the_same(cache, built, shape):
    one = quietly(shape, COLUMNS, 4)
    two = quietly(shape, COLUMNS, 4)
    assert len(built) == 1
    assert len(list(cache.iterdir())) == 1
    assert naive.tables_equal(one, two)
    assert np.array_equal(one.samples, two.samples)
    assert [a.dtype for a in (two.rows, two.starts, two.low, two.high)] == [
        a.dtype for a in (one.rows, one.starts, one.low, one.high)
    ]


def test_other_shapes_meridians_and_samples_have_tables_of_their_own(cache, built, shape):
    quietly(shape, COLUMNS, 4)
    quietly(shape.scaled(1.0000001), COLUMNS, 4)
    quietly(shape, 2 * COLUMNS, 4)
    quietly(shape, COLUMNS, 1)
    assert len(built) == 4
    assert len(list(cache.glob("horizons-*.npz"))) == 4


def test_a_table_of_a_convex_body_can_be_kept_too(cache, built):
    ball = naive.box([-1, -1, -1], [1, 1, 1])
    assert naive.tables_equal(quietly(ball, COLUMNS, 4), quietly(ball, COLUMNS, 4))
    assert len(built) == 1


def test_tables_that_are_quickly_made_are_not_kept(cache, built, shape, monkeypatch):
    monkeypatch.setattr(horizons, "WORTH_KEEPING_S", 1e9)
    quietly(shape, COLUMNS)
    assert not cache.exists()


def test_the_cache_can_be_passed_by(cache, built, shape, monkeypatch):
    quietly(shape, COLUMNS, cache=False)
    monkeypatch.setenv("SMALLBODY_CACHE", "off")
    quietly(shape, COLUMNS)
    assert len(built) == 2
    assert not cache.exists()


def test_without_a_folder_named_the_cache_is_where_the_user_keeps_such_things(monkeypatch, tmp_path):
    platformdirs = pytest.importorskip("platformdirs")
    monkeypatch.delenv("SMALLBODY_CACHE", raising=False)
    assert horizons._cache_file("abc") == platformdirs.user_cache_path("smallbody", appauthor=False) / (
        "horizons-abc.npz"
    )


def arrays_of(file):
    with np.load(file) as z:
        return dict(z)


def cut(file):
    file.write_bytes(file.read_bytes()[:-40])


def flip(file):
    data = bytearray(file.read_bytes())
    data[len(data) // 2] ^= 1
    file.write_bytes(data)


def rewrite(**changes):
    def damage(file):
        kept = arrays_of(file)
        kept |= {k: change(kept[k]) for k, change in changes.items()}
        np.savez(file, **kept)

    return damage


def drop(file):
    kept = arrays_of(file)
    del kept["counts"]
    np.savez(file, **kept)


DAMAGE = {
    "empty": lambda file: file.write_bytes(b""),
    "cut short": cut,
    "one bit": flip,
    "garbage": lambda file: file.write_bytes(os.urandom(5000)),
    "a text": lambda file: file.write_text("horizons\n" * 100),
    "one array missing": drop,
    "objects": rewrite(rows=lambda a: a.astype(object)),
    "facets missing": rewrite(rows=lambda a: a[:-1]),
    "rows twice": rewrite(rows=lambda a: np.where(a == 1, 0, a).astype(np.int32)),
    "rows beyond the table": rewrite(rows=lambda a: np.where(a == 1, 10_000, a).astype(np.int32)),
    "another type": rewrite(low=lambda a: a.astype(float)),
    "counts that do not add up": rewrite(counts=lambda a: a + np.uint8(1)),
    "fewer ends than beginnings": rewrite(high=lambda a: a[:-1]),
}


@pytest.mark.parametrize("damage", DAMAGE)
def test_a_damaged_table_is_noted_and_made_anew(damage, cache, built, shape):
    one = quietly(shape, COLUMNS, 4)
    (file,) = cache.iterdir()
    DAMAGE[damage](file)
    with pytest.warns(Note, match="damaged; it is made anew") as said:
        two = horizons_of(shape, COLUMNS, 4)
    assert len(said) == 1
    assert str(file) in str(said[0].message)
    assert naive.tables_equal(one, two)
    assert naive.tables_equal(one, quietly(shape, COLUMNS, 4))  # and good from then on
    assert len(built) == 2


def test_no_byte_of_a_kept_table_can_be_changed_into_another_answer(cache, shape):
    one = quietly(shape, COLUMNS, 1)
    (file,) = cache.iterdir()
    whole = file.read_bytes()
    rng = np.random.default_rng(2)
    for _ in range(150):
        data = bytearray(whole)
        for at in rng.integers(0, len(data), rng.integers(1, 4)):
            data[at] = rng.integers(256)
        file.write_bytes(bytes(data[: rng.integers(len(data))] if rng.random() < 0.2 else data))
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", Note)
            assert naive.tables_equal(one, horizons_of(shape, COLUMNS, 1))


def test_a_cache_that_cannot_be_a_folder_is_noted_and_the_table_is_there(tmp_path, cache, shape, monkeypatch):
    (tmp_path / "file").write_text("in the way")
    monkeypatch.setenv("SMALLBODY_CACHE", str(tmp_path / "file" / "cache"))
    with pytest.warns(Note, match="horizons are not kept in .*file") as said:
        table = horizons_of(shape, COLUMNS)
    assert len(said) == 1
    assert naive.tables_equal(table, horizons_of(shape, COLUMNS, cache=False))


def test_a_full_disk_is_noted_and_leaves_nothing_behind(cache, shape, monkeypatch):
    def full(*arguments, **choices):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(horizons.np, "savez", full)
    with pytest.warns(Note, match="No space left"):
        horizons_of(shape, COLUMNS)
    assert list(cache.iterdir()) == []


@pytest.mark.skipif(os.name != "posix" or os.geteuid() == 0, reason="rights do not hold the superuser back")
def test_a_folder_without_rights_is_noted(cache, shape):
    cache.mkdir(parents=True)
    for rights in (0o555, 0o000):
        cache.chmod(rights)
        with pytest.warns(Note):
            horizons_of(shape, COLUMNS)
    cache.chmod(0o755)


def test_a_cache_that_others_keep_is_read_without_touching_it(cache, built, shape, monkeypatch):
    quietly(shape, COLUMNS)

    def refused(*arguments, **choices):
        raise PermissionError(errno.EPERM, os.strerror(errno.EPERM))

    monkeypatch.setattr(horizons.os, "utime", refused)
    quietly(shape, COLUMNS)
    assert len(built) == 1


def test_an_interrupted_write_leaves_nothing_behind(cache, shape, monkeypatch):
    def interrupted(*arguments, **choices):
        raise KeyboardInterrupt

    monkeypatch.setattr(horizons.np, "savez", interrupted)
    with pytest.raises(KeyboardInterrupt):
        horizons_of(shape, COLUMNS)
    assert list(cache.iterdir()) == []


def test_the_cache_is_trimmed_to_its_size_and_the_tables_used_longest_ago_go_first(cache, built, shape, monkeypatch):
    bodies = [shape.scaled(k) for k in (1.0, 2.0, 3.0, 4.0)]
    files = []
    for k, body in enumerate(bodies[:3]):
        quietly(body, COLUMNS)
        (new,) = set(cache.iterdir()) - set(files)
        files.append(new)
        os.utime(new, (time.time() - 1000 + k, time.time() - 1000 + k))
    quietly(bodies[0], COLUMNS)  # used again: now the second is the oldest
    monkeypatch.setattr(horizons, "CACHE_BYTES", int(3.5 * files[0].stat().st_size))
    quietly(bodies[3], COLUMNS)
    left = set(cache.iterdir())
    assert len(left) == 3
    assert files[1] not in left
    assert {files[0], files[2]} < left


def test_trimming_leaves_alone_what_is_not_its_own_and_sweeps_what_killed_processes_left(cache, shape):
    cache.mkdir(parents=True)
    for name in ("notes.npz", "horizons-new.part", "horizons-old.part"):
        (cache / name).write_bytes(b"x")
    os.utime(cache / "horizons-old.part", (1.0, 1.0))
    quietly(shape, COLUMNS)
    names = {p.name for p in cache.iterdir()}
    assert "horizons-old.part" not in names
    assert {"notes.npz", "horizons-new.part"} < names


BUILDER = """
import os, sys, time, warnings
sys.path.insert(0, sys.argv[1])
import naive_light as naive
from smallbody.light import horizons, horizons_of
warnings.simplefilter("error")
horizons.WORTH_KEEPING_S = -1.0
shape = naive.jagged(80, seed=3)
horizons_of(shape, 16, 1, cache=False)  # compiled before the start
open(sys.argv[2], "w").close()
while not os.path.exists(sys.argv[3]):
    time.sleep(0.001)
for k in range(30):
    horizons_of(shape.scaled(2.0**(k % 3)), 16, 1)
    if k % 5 == 4:
        for file in horizons._cache_file("x").parent.glob("*.npz"):
            file.unlink(missing_ok=True)
"""


def test_processes_that_build_and_delete_the_same_tables_at_once_do_not_disturb_each_other(
    cache, built, shape, tmp_path
):
    here = os.path.dirname(__file__)
    go = tmp_path / "go"
    ready = [tmp_path / f"ready-{k}" for k in range(2)]
    runs = [subprocess.Popen([sys.executable, "-c", BUILDER, here, str(r), str(go)]) for r in ready]
    while not all(r.exists() for r in ready) and all(run.poll() is None for run in runs):
        time.sleep(0.01)
    go.touch()
    assert [run.wait(60) for run in runs] == [0, 0]
    assert not list(cache.glob("*.part"))
    table = quietly(shape, COLUMNS)
    assert naive.tables_equal(table, horizons_of(shape, COLUMNS, cache=False))
