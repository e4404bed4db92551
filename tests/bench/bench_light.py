"""What horizons cost by size, the memory of a whole `drift`, and what the shadows leave of a torque that is zero.

    python tests/bench/bench_light.py                 everything, some minutes
    python tests/bench/bench_light.py horizons --facets 1000 5000 --kind twolobe
    python tests/bench/bench_light.py drift --facets 50000
    python tests/bench/bench_light.py torque

Core time is that of all threads together, so that other work on the machine does not count. Every size runs in a
process of its own, whose peak of resident memory is the whole of it: interpreter, libraries, compiled kernels.
"""

from __future__ import annotations

import argparse
import json
import os
import resource
import subprocess
import sys
import time

import numpy as np

PEAK_UNIT = 1 if sys.platform == "darwin" else 1024  # bytes in what getrusage calls a unit
MEMORY_TARGET = 2e9


def peak() -> float:
    """Largest resident memory of this process so far, bytes."""
    return float(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * PEAK_UNIT)


def alone(*arguments: object) -> dict:
    """What this file measures when it is called with these arguments in a process of its own."""
    words = [sys.executable, __file__, *map(str, arguments)]
    env = dict(os.environ, SMALLBODY_CACHE="off")
    return json.loads(subprocess.run(words, check=True, stdout=subprocess.PIPE, env=env).stdout)


def one_table(kind: str, facets: int, lit_samples: int) -> dict:
    from smallbody.light import horizons_of
    from smallbody.shape import make_shape

    horizons_of(make_shape(kind, 80, seed=3), 64, lit_samples)  # kernels are compiled or loaded
    shape = make_shape(kind, facets, seed=3)
    before = peak()
    wall, core = time.perf_counter(), time.process_time()
    table = horizons_of(shape, 64, lit_samples)
    core, wall = time.process_time() - core, time.perf_counter() - wall
    built = peak()
    table.thinned()
    per = np.diff(table.starts)
    return {
        "facets": len(shape.facets),
        "core_s": core,
        "wall_s": wall,
        "before": before,
        "built": built,
        "peak": peak(),
        "table": sum(a.nbytes for a in (table.samples, table.rows, table.starts, table.low, table.high)),
        "overshadowed": table.overshadowed_fraction,
        "most": int(per.max(initial=0)),
        "mean": float(per.mean()) if len(per) else 0.0,
    }


def one_drift(kind: str, facets: int, lit_samples: int) -> dict:
    import tempfile
    import threading

    from smallbody import Body, Bulk, Orbit, ShapeSource, Solver, Spin, Surface, drift, make_shape, write_shape

    marks = {}

    class Watch:
        """Notes the peak of memory at the end of every task that the meter hears of."""

        task = ""

        def start(self, task: str, total: int) -> None:
            self.task = task

        def step(self, n: int = 1) -> None:
            """Nothing."""

        def stop(self) -> None:
            marks[f"{len(marks)} {self.task}"] = peak()

    with tempfile.TemporaryDirectory() as folder:
        file = os.path.join(folder, "body.obj")
        write_shape(make_shape(kind, facets, seed=3), file)
        body = Body(
            name="bench",
            shape=ShapeSource(file=file, diameter_km=0.5),
            bulk=Bulk(density_kg_m3=1500),
            surface=Surface(bond_albedo=0.03, emissivity=0.93, thermal_inertia=250),
            spin=Spin(period_h=4.3, obliquity_deg=140, pole_azimuth_deg=70),
            orbit=Orbit(a_au=1.1, e=0.2),
            solver=Solver(lit_samples=lit_samples),
        )
        start = peak()
        wall, core = time.perf_counter(), time.process_time()
        result = drift(body, meter=Watch())
    return {
        "facets": result.checks.facets,
        "overshadowed": result.checks.overshadowed_fraction,
        "core_s": time.process_time() - core,
        "wall_s": time.perf_counter() - wall,
        "start": start,
        "marks": marks,
        "peak": peak(),
        "seconds": result.provenance["seconds"],
        "threads": threading.active_count(),
    }


def horizons(kind: str, sizes: list[int], samples: list[int]) -> None:
    print(f"horizons of a {kind} body, 64 meridians")
    print(
        "facets  samples  core s  wall s  MB table  MB peak (before, built, thinned)  overshadowed  intervals  exponent"
    )
    for lit_samples in samples:
        last = None
        for size in sizes:
            m = alone("_table", kind, size, lit_samples)
            growth = ""
            if last is not None:
                growth = f"{np.log(m['core_s'] / last['core_s']) / np.log(m['facets'] / last['facets']):.2f}"
            print(
                f"{m['facets']:6}  {lit_samples:7}  {m['core_s']:6.2f}  {m['wall_s']:6.2f}  {m['table'] / 1e6:8.0f}  "
                f"{m['before'] / 1e6:8.0f} {m['built'] / 1e6:6.0f} {m['peak'] / 1e6:6.0f}             "
                f"{m['overshadowed']:12.2f}  {m['mean']:4.2f}, {m['most']:2}   {growth:>8}",
                flush=True,
            )
            last = m


def whole_drift(kind: str, size: int, lit_samples: int) -> None:
    m = alone("_drift", kind, size, lit_samples)
    verdict = "within" if m["peak"] < MEMORY_TARGET else "OVER"
    print(
        f"drift of a {kind} body of {m['facets']} facets, {lit_samples} samples, {100 * m['overshadowed']:.0f} % "
        f"overshadowed: peak {m['peak'] / 1e9:.2f} GB ({verdict} {MEMORY_TARGET / 1e9:.0f} GB), "
        f"{m['core_s']:.0f} s of cores, {m['wall_s']:.0f} s by the clock"
    )
    at = m["start"]
    for task, mark in m["marks"].items():
        if mark - at > 1e7:
            print(f"  {task}: peak up {(mark - at) / 1e6:.0f} MB to {mark / 1e6:.0f} MB")
        at = mark
    print(f"  seconds: {m['seconds']}")


def torque(sizes: list[int], seeds: int) -> None:
    """Root mean square over seeds of the mean spin torque of direct light (zero in truth) over that of Lambert's."""
    from smallbody.light import horizons_of, light_sums, places_in_true_anomaly, sun_on_body
    from smallbody.shape import make_shape

    places = places_in_true_anomaly(1.5e11, 0.0, 96)
    sun = sun_on_body(places, 0.7, 0.3)
    u = np.stack([sun.cos_latitude, 0 * sun.cos_latitude, sun.sin_latitude], axis=1)

    def both(shape, lit_samples: int, columns: int) -> tuple[float, float]:
        sums = light_sums(shape, horizons_of(shape, columns, lit_samples, cache=False), sun, places.weight).fine
        return places.weight @ np.cross(sums.lit_lever, u)[:, 2], 2 / 3 * (places.weight @ sums.lever[:, 2])

    print(f"spin torque left to direct light, in % of that of light given back (r.m.s. of {seeds} bodies)")
    print("kind      facets    1 sample   4 samples  16 samples    16 samples, 256 meridians")
    for kind in ("gaussian", "twolobe", "cratered"):
        for size in sizes:
            cases = [(1, 64), (4, 64), (16, 64), (16, 256)]
            shapes = [make_shape(kind, size, seed=seed) for seed in range(seeds)]
            found = np.array([[both(s, *case) for case in cases] for s in shapes])
            direct, back = np.sqrt((found**2).mean(axis=0)).T
            line = "  ".join(f"{100 * d / back[2]:9.3f}" for d in direct)
            print(f"{kind:9} {len(shapes[0].facets):6}   {line}", flush=True)


def main() -> None:
    if len(sys.argv) > 1 and sys.argv[1].startswith("_"):
        what = {"_table": one_table, "_drift": one_drift}[sys.argv[1]]
        print(json.dumps(what(sys.argv[2], int(sys.argv[3]), int(sys.argv[4]))))
        return
    words = argparse.ArgumentParser()
    words.add_argument("what", nargs="?", choices=["all", "horizons", "drift", "torque"], default="all")
    words.add_argument("--kind", default="cratered")
    words.add_argument("--facets", type=int, nargs="+")
    words.add_argument("--samples", type=int, nargs="+", choices=[1, 4, 16])
    words.add_argument("--seeds", type=int, default=4)
    asked = words.parse_args()
    if asked.what in ("all", "horizons"):
        horizons(asked.kind, asked.facets or [1000, 5000, 20000, 50000], asked.samples or [1, 4, 16])
    if asked.what in ("all", "drift"):
        for size in asked.facets or [50000]:
            whole_drift(asked.kind, size, max(asked.samples or [16]))
    if asked.what in ("all", "torque"):
        torque(asked.facets or [320, 1280, 5120], asked.seeds)


if __name__ == "__main__":
    main()
