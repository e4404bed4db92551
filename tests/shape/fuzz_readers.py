"""Throws mutated files at the readers: each must become a shape or a ShapeError of one line, soon, and nothing else.

    python tests/shape/fuzz_readers.py --files 100000 --seed 1

Files stay in memory. What is accepted is also checked; sound shapes are weighed, written and read again, others are
mended or refused. Exit code 1 if anything went wrong.
"""

from __future__ import annotations

import argparse
import struct
import sys
import time
import warnings
from collections import Counter
from dataclasses import dataclass, field

import numpy as np

from smallbody.errors import Note, ShapeError
from smallbody.shape import Shape, check_shape, make_shape, mend_shape, parse_shape, shape_bytes

SLOW_S = 2.0
WORDS = [
    *b"nan NaN inf -inf 1e999 -1 0 1 4 2147483648 4294967295 99999999999999999999 1e9 0x10 1_000 1,5 --1 + - .".split(),
    *b"/ // 1//1 1/2/3 \\ # ! \xff \x00 v f 3 end_header endsolid solid vertex facet".split(b" "),
    b"\n", b"\r", b"\r\n", b"\t", b"  ", b"\x0b", b"\x0c", "½".encode(), "٣".encode(),
    b"element face 1000000000", b"property list uchar int vertex_indices", b"format ascii 1.0",
]  # fmt: skip


@dataclass
class Tally:
    """What became of the files."""

    accepted: Counter[str] = field(default_factory=Counter)
    sound: Counter[str] = field(default_factory=Counter)
    mended: Counter[str] = field(default_factory=Counter)
    refused: Counter[str] = field(default_factory=Counter)
    wrong: list[str] = field(default_factory=list)
    files: int = 0
    slowest_s: float = 0.0
    seconds: float = 0.0


def seeds() -> list[tuple[str, bytes]]:
    """Sound files of every format and layout, small."""
    ball, body = make_shape("sphere", 20), make_shape("gaussian", 80, 3)
    out = []
    for shape in (ball, body):
        for suffix in (".obj", ".tab", ".stl", ".ply"):
            out.append((suffix, shape_bytes(shape, suffix, "km", 4)))
    v, f = ball.vertices_m.round(3).tolist(), ball.facets.tolist()
    rows = [" ".join(map(str, p)) for p in v]
    text = "".join(f"v {r}\n" for r in rows)
    out.append(
        (".obj", (text + "vn 0 0 1\n" + "".join(f"f {a - 12}//1 {b - 12}//1 {c - 12}//1\n" for a, b, c in f)).encode())
    )
    out.append(
        (".obj", (text + "f 1 \\\n2 3\n" + "".join(f"f {a + 1}/1 {b + 1}/1 {c + 1}/1\r\n" for a, b, c in f)).encode())
    )
    cube = "".join(f"v {x} {y} {z}\n" for x in (0, 1) for y in (0, 1) for z in (0, 1))
    quads = "f 1 2 4 3\nf 5 7 8 6\nf 1 5 6 2\nf 3 4 8 7\nf 1 3 7 5\nf 2 6 8 4\n"
    out.append((".obj", (cube + quads).encode()))
    out.append((".obj", (text + "f " + " ".join(map(str, range(1, 13))) + "\n").encode()))
    for number, base, lead in ((None, 0, ""), (1, 1, ""), (None, 1, "3 "), (None, 1, "3\n")):
        mark = (lambda k: f"{k + 1} ") if number else (lambda k: "")
        facets = [mark(k) + lead + " ".join(str(c + base) for c in t) for k, t in enumerate(f)]
        table = [mark(k) + r for k, r in enumerate(rows)]
        out.append((".tab", "\n".join([f"{len(v)} {len(f)}", *table, *facets, ""]).encode()))
        out.append((".tab", "\n".join([f"{len(v)}", *table, f"{len(f)}", *facets, ""]).encode()))
        out.append((".tab", "\n".join([f"{len(v)}", f"{len(f)}", *table, *facets, ""]).encode()))
    stl = "".join(
        "facet normal 0 0 0\n outer loop\n" + "".join(f"  vertex {rows[c]}\n" for c in t) + " endloop\nendfacet\n"
        for t in f
    )
    out.append((".stl", f"solid ball\n{stl}endsolid ball\n".encode()))
    head = (
        "ply\nformat {} 1.0\nelement vertex 12\nproperty float x\nproperty float y\nproperty float z\nelement face 20\n"
    )
    head += "property list uchar int vertex_indices\nend_header\n"
    facets = [f"3 {a} {b} {c}" for a, b, c in f]
    out.append((".ply", (head.format("ascii") + "\n".join([*rows, *facets, ""])).encode()))
    big = b"".join(struct.pack(">3f", *p) for p in v) + b"".join(struct.pack(">B3i", 3, *t) for t in f)
    out.append((".ply", head.format("binary_big_endian").encode() + big))
    return out


def mutated(data: bytes, other: bytes, rng: np.random.Generator) -> bytes:
    """The content after one to four random changes, mostly one or two."""
    for _ in range(int(rng.choice([1, 1, 1, 1, 2, 2, 3, 4]))):
        data = _changed(bytearray(data), other, rng)
    return data


def _changed(data: bytearray, other: bytes, rng: np.random.Generator) -> bytes:
    n = len(data)
    if not n:
        return bytes(other)
    at, length = int(rng.integers(n)), int(rng.integers(1, 40))
    change = int(rng.integers(16))
    if change == 0:  # flip a bit
        data[at] ^= 1 << int(rng.integers(8))
    elif change == 1:  # any byte
        data[at] = int(rng.integers(256))
    elif change == 2:  # cut short
        del data[at:]
    elif change == 3:  # leave some out
        del data[at : at + length]
    elif change == 4:  # say some twice
        data[at:at] = data[at : at + length]
    elif change == 5:  # put in garbage
        data[at:at] = rng.integers(0, 256, length).astype(np.uint8).tobytes()
    elif change == 6:  # put in a word
        data[at:at] = WORDS[int(rng.integers(len(WORDS)))]
    elif change in (7, 8):  # change a word for another
        words = bytes(data).split(b" ")
        words[int(rng.integers(len(words)))] = WORDS[int(rng.integers(len(WORDS)))]
        return b" ".join(words)
    elif change in (9, 10):  # lines left out, twice, or in another order
        lines = bytes(data).split(b"\n")
        a, b = int(rng.integers(len(lines))), int(rng.integers(len(lines)))
        how = int(rng.integers(4))
        if how == 0:
            del lines[a]
        elif how == 1:
            lines.insert(b, lines[a])
        elif how == 2:
            lines[a], lines[b] = lines[b], lines[a]
        else:
            lines[a] = lines[a] + b" " + lines[b]
        return b"\n".join(lines)
    elif change == 11:  # the end of another file
        data[at:] = other[int(rng.integers(len(other))) :]
    elif change in (12, 13, 14):  # one digit for another
        digits = [k for k in range(at, min(n, at + 200)) if 48 <= data[k] <= 57]
        if digits:
            data[digits[int(rng.integers(len(digits)))]] = 48 + int(rng.integers(10))
    else:  # a number of four bytes
        data[at : at + 4] = struct.pack("<I", int(rng.choice([0, 1, 0x7FFFFFFF, 0x80000000, 0xFFFFFFFF, 0x7FC00000])))
    return bytes(data)


def throw(files: int, seed: int, tally: Tally, show_every_s: float = 0.0) -> None:
    """Mutates and reads so many files, counting into the tally."""
    rng = np.random.default_rng(seed)
    corpus = seeds()
    suffixes = [".obj", ".tab", ".stl", ".ply"]
    begun = shown = time.perf_counter()
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        warnings.simplefilter("ignore", Note)
        for k in range(files):
            suffix, data = corpus[int(rng.integers(len(corpus)))]
            data = mutated(data, corpus[int(rng.integers(len(corpus)))][1], rng)
            chance = rng.random()
            name = "x" + (suffix if chance < 0.8 else suffixes[int(rng.integers(4))] if chance < 0.9 else ".shape")
            _throw_one(name, data, k, tally)
            now = time.perf_counter()
            if show_every_s and now - shown > show_every_s:
                left = (now - begun) / (k + 1) * (files - k - 1)
                print(f"{k + 1:,} files, {left:.0f} s left", file=sys.stderr, flush=True)
                shown = now
    tally.seconds += time.perf_counter() - begun


def _throw_one(name: str, data: bytes, k: int, tally: Tally) -> None:
    start = time.perf_counter()
    kind = name[1:]
    tally.files += 1
    try:
        shape = parse_shape(data, name)
        tally.accepted[kind] += 1
        if _is_sound(shape):
            tally.sound[kind] += 1
            again = parse_shape(shape_bytes(shape, ".ply", "m"), "x.ply")
            if again.sha256 != shape.sha256:
                raise AssertionError("written and read again it is another shape")
        elif _was_mended(shape):
            tally.mended[kind] += 1
    except ShapeError as error:
        tally.refused[kind] += 1
        text = str(error)
        if not text.isprintable() or len(text) > 400 or name not in text:
            tally.wrong.append(f"file {k} ({name}): message {text!r}")
    except Exception as error:
        tally.wrong.append(f"file {k} ({name}): {type(error).__name__}: {error}; content {data[:400]!r}")
    took = time.perf_counter() - start
    tally.slowest_s = max(tally.slowest_s, took)
    if took > SLOW_S:
        tally.wrong.append(f"file {k} ({name}): {took:.1f} s; content {data[:400]!r}")


def _is_sound(shape: Shape) -> bool:
    if any(fault.serious for fault in check_shape(shape)):
        return False
    mass = shape.mass
    if not (mass.volume_m3 > 0.0 and np.isfinite(mass.inertia_m5).all() and (mass.moments_m5 > 0.0).all()):
        raise AssertionError(f"a shape that passes the check has volume {mass.volume_m3} and moments {mass.moments_m5}")
    return True


def _was_mended(shape: Shape) -> bool:
    try:
        mended, done = mend_shape(shape)
    except ShapeError:
        return False
    if not done or not _is_sound(mended):
        raise AssertionError(f"mended ({'; '.join(done)}) it is not sound")
    return True


def report(tally: Tally) -> str:
    """A few lines for people."""
    rate = tally.files / max(tally.seconds, 1e-9)
    lines = [f"{tally.files:,} files in {tally.seconds:.0f} s ({rate:.0f} a second), slowest {tally.slowest_s:.2f} s"]
    for kind in [*sorted({*tally.accepted, *tally.refused}), "all"]:
        n, sound, mended, refused = (
            c.total() if kind == "all" else c[kind] for c in (tally.accepted, tally.sound, tally.mended, tally.refused)
        )
        lines.append(f"  {kind}: {n:,} accepted ({sound:,} sound, {mended:,} could be mended), {refused:,} refused")
    lines.append(f"  {len(tally.wrong)} wrong")
    return "\n".join([*lines, *tally.wrong[:20]])


def main() -> int:
    """Exit code 1 if a file met anything but a shape or a ShapeError, or took longer than two seconds."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--files", type=int, default=100_000)
    parser.add_argument("--seed", type=int, default=1)
    asked = parser.parse_args()
    tally = Tally()
    throw(asked.files, asked.seed, tally, show_every_s=20.0)
    print(report(tally))
    return 1 if tally.wrong else 0


if __name__ == "__main__":
    sys.exit(main())
