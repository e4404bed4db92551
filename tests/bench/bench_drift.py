"""How long a whole `drift` takes on a concave body of 5,000 facets, against the marching reference, in one run.

    python tests/bench/bench_drift.py [--facets 5000] [--sample 32]

Core time (of all threads together) is compared, so that other work on the machine does not count. The marching
reference is timed on a sample of the facets and scaled to all of them: heat only, once, without any error estimate,
while `drift` is everything: horizons, light, heat, the coarser repeats that its errors come from, half the facets.
Accuracy is that of the sample's late push, <E exp(i lambda)>, against the lag solver at eight times the nodes.
"""

from __future__ import annotations

import argparse
import os
import tempfile
import time

import numpy as np


def core(work):
    """Result, core seconds, wall seconds."""
    wall, cores = time.perf_counter(), time.process_time()
    out = work()
    return out, time.process_time() - cores, time.perf_counter() - wall


def main() -> None:
    words = argparse.ArgumentParser()
    words.add_argument("--facets", type=int, default=5000)
    words.add_argument("--sample", type=int, default=32)
    asked = words.parse_args()
    os.environ["SMALLBODY_CACHE"] = tempfile.mkdtemp()

    from smallbody import Body, Bulk, Orbit, ShapeSource, Solver, Spin, Surface, drift, make_shape, write_shape
    from smallbody.constants import AU_M
    from smallbody.heat import Ground, LagSolver, march_period
    from smallbody.light import (
        course,
        horizons_of,
        lit_cosines,
        lit_on_course,
        places_between,
        sun_on_body,
        whole_rotations,
    )
    from smallbody.push.rates import _rates
    from smallbody.push.solve import heat_of, light_of, world_of
    from smallbody.shape import prepare_shape
    from smallbody.workers import SILENT

    def body(facets: int, **solver):
        file = os.path.join(tempfile.gettempdir(), f"smallbody-bench-{facets}.obj")
        write_shape(make_shape("cratered", facets, seed=7), file)
        return Body(
            name="bench",
            shape=ShapeSource(file=file, diameter_km=0.5),
            bulk=Bulk(density_kg_m3=1500),
            surface=Surface(bond_albedo=0.03, emissivity=0.93, thermal_inertia=250),
            spin=Spin(period_h=4.3, obliquity_deg=140, pole_azimuth_deg=70),
            orbit=Orbit(a_au=1.1, e=0.2),
            solver=Solver(rotation_nodes=64, orbit_places=24, **solver),
        )

    drift(body(320))  # compiles, or loads what was compiled
    work = body(asked.facets)
    result, cold, cold_wall = core(lambda: drift(work))
    _, warm, warm_wall = core(lambda: drift(work))
    plain_body = body(asked.facets, halved_shape=False)
    _, plain, _ = core(lambda: drift(plain_body))

    shape = prepare_shape(work.shape)
    horizons = horizons_of(shape, 64, 16)
    world = world_of(work, shape)

    def once():
        light = light_of(world, horizons, 192, SILENT)
        return _rates(world, light.seen, heat_of(world, horizons, 24, SILENT, keep=True).seen)

    _, bare, _ = core(once)
    print(f"facets {result.checks.facets}, overshadowed {result.checks.overshadowed_fraction:.2f}")
    print(f"drift, horizons made       {cold:7.2f} s of cores  {cold_wall:6.2f} s by the clock")
    print(f"drift, horizons from cache {warm:7.2f} s of cores  {warm_wall:6.2f} s by the clock")
    print(f"rates alone, no error estimate {bare:4.2f} s of cores")
    print("  its parts, seconds by the clock:", result.provenance["seconds"])
    print("  da/dt", result.orbit.da_dt_au_per_myr, "domega/dt", result.spin.domega_dt_rad_per_d2)

    rng = np.random.default_rng(1)
    some = np.sort(rng.choice(horizons.shadowed_facets, asked.sample, replace=False))
    ground = Ground(0.93, 250.0)
    a, e = 1.1 * AU_M, 0.2
    tilt, turn = np.radians(140.0), np.radians(70.0)
    orbits, rotations = whole_rotations(work.rotations_per_orbit, 1)
    out = {}
    for steps in (64, 96):
        way = course(a, e, tilt, turn, orbits, rotations, rotations * steps)
        flux = way.places.flux_w_m2[:, None] * 0.97

        def marched(way=way, flux=flux):
            light = lit_on_course(shape, horizons, way, some) * flux
            return light, march_period(ground, way.period_s, light, fast_rate=way.rate, threads=1)

        marched() if steps == 64 else None
        (light, t), seconds, _ = core(marched)
        out[steps] = seconds / len(some)
        excess = ground.emissivity * 5.670374419e-8 * t**4 - light
        late = np.exp(1j * 2 * np.pi * way.turns)
        out[f"push {steps}"] = (excess * late[:, None]).mean(axis=0)

    def lag(nodes: int, count: int, facets: np.ndarray):
        places = places_between(a, e, count)
        sun = sun_on_body(places, tilt, turn)
        table = {64: horizons, 32: horizons.thinned()}.get(nodes) or horizons_of(shape, nodes, 16)
        rates = 2 * np.pi * rotations / (orbits * 2 * np.pi / places.mean_motion) - sun.ascension_rate
        solver = LagSolver(ground, places, nodes, rates)
        total = np.zeros(len(facets), complex)
        for start in range(0, len(facets), 16):
            part = facets[start : start + 16]
            light = lit_cosines(shape, table, sun, part) * places.flux_w_m2[:, None, None] * 0.97
            t, _ = solver.solve(light)
            x = solver.excess(t, light)
            total[start : start + 16] = places.weight @ (x[1] + 1j * x[2])
        return total

    quick = lag(64, 24, some)
    many = horizons.shadowed_facets[: 64 * 16]
    _, seconds, _ = core(lambda: lag(64, 24, many))
    seconds /= len(many)
    fine = lag(512, 96, some)
    print(f"lag solver, 64 nodes, 24 places: {1e3 * seconds:.3f} ms of core a facet, light included")
    taken = quick + (quick - lag(32, 24, some)) / 3
    wrong = np.abs(np.mean(taken - fine)) / np.abs(np.mean(fine)) * 100
    print(f"  as drift takes it, with 32 nodes as well, wrong by {wrong:.3f} %")
    print(f"  heat's late push wrong by {np.abs(np.mean(quick - fine)) / np.abs(np.mean(fine)) * 100:.3f} %")
    for steps in (64, 96):
        wrong = np.abs(np.mean(out[f"push {steps}"] - fine)) / np.abs(np.mean(fine)) * 100
        total = out[steps] * result.checks.facets
        print(
            f"marching, {steps} steps: {1e3 * out[steps]:.1f} ms of core a facet, {total:.0f} s for all; "
            f"wrong by {wrong:.3f} %"
        )
        print(
            f"  over lag a facet {out[steps] / seconds:.0f}; "
            f"over rates alone {total / bare:.0f}, drift with errors {total / plain:.0f}, and with half the facets "
            f"{total / warm:.0f}; with horizons made {total / cold:.0f}"
        )


if __name__ == "__main__":
    main()
