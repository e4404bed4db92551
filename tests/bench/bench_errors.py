"""Whether the numerical errors that `drift` states are honest: small concave bodies against far finer runs.

    python tests/bench/bench_errors.py [--cases 40] [--facets 240] [--nodes 64] [--samples 16]

Bodies of five kinds, orbits, poles and grounds are drawn at random. The finer run has four times the rotation nodes,
three times the places of the heat and four of the light, and each facet cut into four with 16 samples each; heat is
solved for the same facets as before, since smaller ones would be another model (light and heat even over a facet), not
a better solution of this one.

Printed for every rate: in how many cases the true error is within the stated one, within one and a half, and the ratio
of true to stated error at which four fifths of the cases are covered. Then, for each cause by itself, what part of the
change from its coarser repeat the true error is, at the median and at four fifths of the cases: that is what LEFT_OF in
smallbody/push/rates.py stands for (what half the rotation nodes change in the light alone, since the heat is
extrapolated). Errors below 1e-6 of a rate's natural scale (sunlight on the body's disc, pushing in
the best direction) are left out.
"""

from __future__ import annotations

import argparse
import os
import sys
import time
from pathlib import Path

import numpy as np

os.environ["SMALLBODY_CACHE"] = "off"
sys.path.insert(0, str(Path(__file__).parents[1] / "push"))

from push_bodies import ORBIT_KEYS, SPIN_KEYS, body, rates_of, scales

from smallbody.push import drift, rates
from smallbody.shape import Shape, make_shape

KEYS = [k for k in ORBIT_KEYS + SPIN_KEYS if k != "da_dt_m_per_yr"]
KINDS = ("twolobe", "cratered", "gaussian", "windmill", "top")
FLOOR = 1e-6
CAUSES = {
    "rotation_nodes": "light",
    "orbit_places": "heat",
    "light_places": "light",
    "lit_samples": "light",
}


def cut_in_four(shape: Shape) -> Shape:
    """The same surface, every facet cut at the middles of its edges."""
    v, f = shape.vertices_m, shape.facets
    edges = np.sort(np.concatenate([f[:, [0, 1]], f[:, [1, 2]], f[:, [2, 0]]]), axis=1)
    edges, which = np.unique(edges, axis=0, return_inverse=True)
    ab, bc, ca = which.reshape(3, len(f)) + len(v)
    a, b, c = f.T
    parts = [np.stack(p, axis=1) for p in ((a, ab, ca), (ab, b, bc), (ca, bc, c), (ab, bc, ca))]
    return Shape(np.concatenate([v, v[edges].mean(axis=1)]), np.concatenate(parts))


def cases(count: int, facets: int, seed: int = 1):
    """Name, changes and shape of `count` bodies."""
    rng = np.random.default_rng(seed)
    for k in range(count):
        kind = KINDS[k % len(KINDS)]
        changes = {
            "spin.period_h": float(np.exp(rng.uniform(np.log(2.5), np.log(30.0)))),
            "spin.obliquity_deg": float(np.degrees(np.arccos(rng.uniform(-1, 1)))),
            "spin.pole_azimuth_deg": float(rng.uniform(0, 360)),
            "orbit.a_au": float(rng.uniform(0.8, 3.0)),
            "orbit.e": float(rng.uniform(0.0, 0.55)),
            "orbit.peri_deg": float(rng.uniform(0, 360)),
            "surface.thermal_inertia": float(np.exp(rng.uniform(np.log(10.0), np.log(2000.0)))),
            "surface.bond_albedo": float(rng.uniform(0.0, 0.4)),
        }
        yield f"{kind} {k}", changes, make_shape(kind, facets, seed=k, diameter_km=0.5)


def one(changes, shape, nodes: int, samples: int):
    """Stated and true errors by rate, and by cause (what a coarser repeat changes, true error); over natural scales."""
    asked = body().changed(changes | {"solver.rotation_nodes": nodes, "solver.lit_samples": samples})
    cut = cut_in_four(shape)
    places = rates.default_places(asked.orbit.e)
    light_places = rates.default_light_places(asked.orbit.e)
    result = drift(asked, shape=shape)
    value, stated = rates_of(result, KEYS)
    natural = scales(result)

    def run(it=shape, **more):
        return rates_of(drift(asked.changed({f"solver.{k}": x for k, x in more.items()}), shape=it), KEYS)[0]

    def light(it=shape, **more):  # ground without inertia gives the light back at once
        now = asked.changed({"surface.thermal_inertia": 0.0, "solver.orbit_places": 10})
        return rates_of(drift(now.changed({f"solver.{k}": x for k, x in more.items()}), shape=it), KEYS)[0]

    here = light()
    dense = light(rotation_nodes=4 * nodes)
    fine = run(rotation_nodes=4 * nodes, orbit_places=3 * places)
    best = light(cut, rotation_nodes=4 * nodes, light_places=4 * light_places, lit_samples=16)
    true = {k: best[k] + fine[k] - dense[k] for k in KEYS}
    finer = {
        "rotation_nodes": (here, light(rotation_nodes=nodes // 2), dense),
        "orbit_places": (value, run(orbit_places=places // 2), run(orbit_places=3 * places)),
        "light_places": (here, light(light_places=light_places // 2), light(light_places=4 * light_places)),
    }
    if samples > 1:
        finer["lit_samples"] = (here, light(lit_samples=samples // 4), light(cut, lit_samples=16))
    return {
        k: (
            stated[k] / natural[k],
            abs(true[k] - value[k]) / natural[k],
            {
                c: (abs(less[k] - x[k]) / natural[k], abs(more[k] - x[k]) / natural[k])
                for c, (x, less, more) in finer.items()
            },
        )
        for k in KEYS
    }


def coverage(found) -> dict[str, tuple[int, float, float, float]]:
    """By rate, and for all: how many, share within the stated error, within 1.5 of it, ratio that covers 80 %."""
    ratios = {
        k: [true / max(stated, 1e-300) for stated, true, _ in (case[k] for case in found) if max(true, stated) > FLOOR]
        for k in KEYS
    }
    ratios["all"] = [r for k in KEYS for r in ratios[k]]
    return {
        k: (len(r), np.mean(np.array(r) <= 1), np.mean(np.array(r) <= 1.5), np.quantile(r, 0.8))
        for k, r in ratios.items()
        if r
    }


def left(found, cause: str, keys=KEYS) -> tuple[int, float, float] | None:
    """Median and 80 % quantile of the true error over what the coarser repeat changes."""
    pairs = [case[k][2][cause] for case in found for k in keys if cause in case[k][2]]
    ratios = [true / change for change, true in pairs if change > FLOOR]
    return (len(ratios), float(np.median(ratios)), float(np.quantile(ratios, 0.8))) if ratios else None


def main() -> None:
    words = argparse.ArgumentParser()
    words.add_argument("--cases", type=int, default=40)
    words.add_argument("--facets", type=int, default=240)
    words.add_argument("--nodes", type=int, default=64)
    words.add_argument("--samples", type=int, default=16)
    asked = words.parse_args()
    began, found = time.perf_counter(), []
    for name, changes, shape in cases(asked.cases, asked.facets):
        found.append(one(changes, shape, asked.nodes, asked.samples))
        stated, true, _ = found[-1]["domega_dt_rad_per_d2"]
        print(f"{name:12s} domega/dt stated {stated:.1e} true {true:.1e} of scale", file=sys.stderr)
    print(
        f"{asked.cases} bodies of about {asked.facets} facets, {asked.nodes} nodes, {asked.samples} samples, "
        f"{time.perf_counter() - began:.0f} s; LEFT_OF {rates.LEFT_OF}"
    )
    print(f"{'rate':32s} cases   within   within 1.5   80 % within   true error: median, 80 % of scale")
    for k, (count, within, further, at) in coverage(found).items():
        true = [case[x][1] for case in found for x in (KEYS if k == "all" else [k])]
        print(
            f"{k:32s} {count:5d}   {within:6.0%}   {further:10.0%}   {at:11.2f}   "
            f"{np.median(true):.1e} {np.quantile(true, 0.8):.1e}"
        )
    print("\nwhat part of the change from a coarser repeat is left: median, 80 % quantile")
    for cause in CAUSES:
        for name, keys in (("all rates", KEYS), *((k, [k]) for k in ("da_dt_au_per_myr", *SPIN_KEYS))):
            if (it := left(found, cause, keys)) is not None:
                print(f"{cause:16s} {CAUSES[cause]:6s} {name:28s} {it[0]:5d} {it[1]:8.2f} {it[2]:8.2f}")


if __name__ == "__main__":
    main()
