"""A sweep computes each cell once, keeps what is done, and ends in the same bytes whatever happened on the way."""

import os
import random
import signal
import subprocess
import sys
import time
import warnings
from pathlib import Path

import fake_drift
import numpy as np
import pytest
import xarray
from fake_drift import BODY, Engine, not_above

import smallbody
from smallbody.batch import so_far, sweep
from smallbody.errors import BodyError, Note, ShapeError, StoreError
from smallbody.store import Parts, load, save

OVER = {"spin.obliquity_deg": [0.0, 45.0, 90.0, 180.0], "surface.thermal_inertia": [50.0, 500.0, 1000.0]}


@pytest.fixture
def engine(monkeypatch):
    def use(**how) -> Engine:
        made = Engine(**how)
        monkeypatch.setattr("smallbody.push.drift", made)
        return made

    return use


@pytest.fixture(autouse=True)
def no_notes_unless_asked_for():
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", Note)
        yield


def expected(obliquity: float, inertia: float) -> float:
    return np.cos(np.radians(obliquity)) * inertia / 2000.0


def test_every_cell_is_computed_once_and_stands_in_its_place(engine):
    calls = engine().calls
    result = sweep(BODY, OVER)
    assert len(calls) == 12
    assert result.arrays["spin_obliquity_deg"].units == "deg"
    assert result.arrays["surface_thermal_inertia"].units == "J m-2 K-1 s-1/2"
    drift = result.arrays["da_dt_au_per_myr"]
    assert (drift.dims, drift.units) == (("spin_obliquity_deg", "surface_thermal_inertia"), "au/Myr")
    for i, obliquity in enumerate(OVER["spin.obliquity_deg"]):
        for j, inertia in enumerate(OVER["surface.thermal_inertia"]):
            want = expected(obliquity, inertia)
            assert drift.values[i, j] == pytest.approx(want, rel=1e-12)
            assert result.arrays["da_dt_au_per_myr_error"].values[i, j] == pytest.approx(1e-3 * abs(want), rel=1e-12)
            for source, share in fake_drift.SHARES.items():
                assert result.arrays[f"da_dt_m_per_yr_{source}"].values[i, j] == pytest.approx(150 * share * want)
    assert np.isnan(result.arrays["dnode_dt_deg_per_myr"].values).all()
    assert result.failed == []
    assert not any(body.solver.halved_shape for body, _, _ in calls)


def test_the_shape_is_prepared_once_and_its_horizons_are_shared(engine, monkeypatch):
    calls, made = engine().calls, []
    real = smallbody.shape.prepare_shape
    monkeypatch.setattr("smallbody.shape.prepare_shape", lambda source: made.append(source) or real(source))
    sweep(BODY, OVER)
    assert len(made) == 1
    assert len({id(shape) for _, shape, _ in calls}) == 1
    assert len({id(horizons) for _, _, horizons in calls}) == 1


def test_sizes_share_the_horizons_and_facet_counts_and_nodes_do_not(engine, monkeypatch):
    calls, tables = engine().calls, []
    real = smallbody.light.horizons_of
    monkeypatch.setattr("smallbody.light.horizons_of", lambda *a: tables.append(a) or real(*a))
    sizes = sweep(
        BODY, {"shape.sphere_facets": [80.0, 320.0], "shape.diameter_km": [0.5, 2.0], "solver.rotation_nodes": [16, 32]}
    )
    assert sizes.arrays["da_dt_au_per_myr"].values.shape == (2, 2, 2)
    assert len(tables) == 4
    for body, shape, horizons in calls:
        assert shape.diameter_m == pytest.approx(1000 * body.shape.diameter_km, rel=1e-9)
        assert len(shape.facets) == body.shape.sphere_facets == len(horizons.rows)
        assert horizons.columns == body.solver.rotation_nodes
        own = real(shape, body.solver.rotation_nodes, 1)
        np.testing.assert_allclose(horizons.samples, own.samples, rtol=1e-9, atol=1e-9)
    assert "shape_sha256" not in sizes.attrs  # there is more than one shape


def test_a_cell_that_fails_is_a_row_with_its_reason(engine):
    engine(fails=not_above(60.0))
    with pytest.warns(Note) as said:
        result = sweep(BODY, OVER)
    assert [cell["spin.obliquity_deg"] for cell, _ in result.failed] == [90.0] * 3 + [180.0] * 3
    assert result.failed[0][1] == "facets still move by 3 K"
    assert np.isnan(result.arrays["da_dt_au_per_myr"].values[2:]).all()
    assert np.isfinite(result.arrays["da_dt_au_per_myr"].values[:2]).all()
    assert "6 of 12 cells failed; the first, spin.obliquity_deg = 90, surface.thermal_inertia = 50: facets" in str(
        said[0].message
    )
    assert "notes on 2 of 12 cells; the first: raise something" in str(said[1].message)


def test_an_error_nobody_foresaw_is_a_row_too(engine):
    engine(fails=lambda body: ZeroDivisionError("by nothing") if body.spin.obliquity_deg == 45.0 else None)
    assert sweep(BODY, OVER).failed[0][1] == "ZeroDivisionError: by nothing"


@pytest.mark.parametrize(("over", "words"), [
    ({}, "nothing to sweep"),
    ({"spin.obliquity_deg": []}, "no values"),
    ({"spin.obliquity_deg": [0.0, 200.0]}, "obliquity_deg"),
    ({"spin.obliqity_deg": [0.0]}, "obliquity_deg"),
    ({"spin.obliquity_deg": [1.0, 1]}, "given twice"),
    ({"spin.obliquity_deg": ["a"]}, "not over"),
    ({"spin.obliquity_deg": [float("nan")]}, "obliquity_deg"),
    ({"spin.pole_ecliptic_deg": [1.0]}, "pole_ecliptic_deg"),
    ({"solver.method": [1.0]}, "method"),
    ({"solver.rotation_nodes": [64, 65]}, "rotation_nodes"),
    ({"bulk.mass_kg": [1e10], "bulk.density_kg_m3": [1000.0]}, "given twice"),
    ({"name": [1.0]}, "name"),
])  # fmt: skip
def test_what_cannot_be_swept_is_told_before_anything_is_computed(engine, tmp_path, over, words):
    calls = engine().calls
    with pytest.raises(BodyError, match=words) as caught:
        sweep(BODY, over, out=tmp_path / "s.h5")
    assert "\n" not in str(caught.value)
    assert calls == []
    assert list(tmp_path.iterdir()) == []


def test_a_shape_that_is_not_there_is_told_before_anything_is_computed(engine, tmp_path):
    calls = engine().calls
    with pytest.raises(ShapeError):
        sweep(BODY.changed({"shape.file": str(tmp_path / "no.obj")}), OVER, out=tmp_path / "s.h5")
    assert calls == []
    assert list(tmp_path.iterdir()) == []


# the file


def test_the_file_holds_the_grid_and_opens_in_xarray(engine, tmp_path):
    engine(fails=not_above(100.0))
    result = sweep(BODY, OVER, out=tmp_path / "s.h5")
    assert os.listdir(tmp_path) == ["s.h5"]
    with xarray.open_dataset(tmp_path / "s.h5", engine="h5netcdf") as data:
        there = data.sel(spin_obliquity_deg=45.0, surface_thermal_inertia=500.0)
        assert float(there.da_dt_au_per_myr) == pytest.approx(expected(45.0, 500.0))
        assert data.da_dt_au_per_myr.attrs["units"] == "au/Myr"
        assert str(data.error.sel(spin_obliquity_deg=180.0, surface_thermal_inertia=50.0).values).startswith(
            "facets still"
        )
    back = load(tmp_path / "s.h5")
    assert back.kind == "sweep"
    assert back.name == "stand-in"
    assert 'name = "stand-in"' in back.attrs["body_toml"]
    for name, quantity in result.arrays.items():
        np.testing.assert_array_equal(back.arrays[name].values, quantity.values)


def test_saving_a_sweep_made_in_memory_gives_the_same_bytes_as_sweeping_to_a_file(engine, tmp_path):
    engine()
    save(sweep(BODY, OVER), tmp_path / "memory.h5")
    sweep(BODY, OVER, out=tmp_path / "s.h5")
    assert (tmp_path / "memory.h5").read_bytes() == (tmp_path / "s.h5").read_bytes()


def test_ctrl_c_keeps_what_is_done_and_a_second_call_goes_on(engine, tmp_path):
    engine()
    sweep(BODY, OVER, out=tmp_path / "unbroken.h5")
    engine(stop_at=5)
    with pytest.raises(KeyboardInterrupt):
        sweep(BODY, OVER, out=tmp_path / "s.h5")
    assert not (tmp_path / "s.h5").exists()
    part = so_far(tmp_path / "s.h5.parts")
    assert np.isfinite(part.arrays["da_dt_au_per_myr"].values).sum() == 5
    assert (part.arrays["error"].values == "not computed yet").sum() == 7
    with pytest.raises(StoreError, match="goes on with it"):
        load(tmp_path / "s.h5")
    calls = engine().calls
    sweep(BODY, OVER, out=tmp_path / "s.h5")
    assert len(calls) == 7
    assert (tmp_path / "s.h5").read_bytes() == (tmp_path / "unbroken.h5").read_bytes()


def test_a_sweep_that_is_done_is_not_computed_again_and_leftover_parts_go(engine, tmp_path):
    engine()
    first = sweep(BODY, OVER, out=tmp_path / "s.h5")
    before = (tmp_path / "s.h5").read_bytes()
    engine(stop_at=1)
    (tmp_path / "s.h5").rename(tmp_path / "away.h5")
    with pytest.raises(KeyboardInterrupt):
        sweep(BODY, OVER, out=tmp_path / "s.h5")
    (tmp_path / "away.h5").rename(tmp_path / "s.h5")  # as if stopped between the file and the removal of its parts
    calls = engine().calls
    with pytest.warns(Note, match="already holds this sweep"):
        again = sweep(BODY, OVER, out=tmp_path / "s.h5")
    assert calls == []
    assert os.listdir(tmp_path) == ["s.h5"]
    assert (tmp_path / "s.h5").read_bytes() == before
    np.testing.assert_array_equal(again.arrays["de_dt_per_myr"].values, first.arrays["de_dt_per_myr"].values)


def test_a_file_of_another_sweep_is_replaced_and_an_unfinished_one_is_refused(engine, tmp_path):
    engine()
    sweep(BODY, OVER, out=tmp_path / "s.h5")
    other = BODY.changed({"bulk.density_kg_m3": 1000.0})
    assert sweep(other, OVER, out=tmp_path / "s.h5").arrays["da_dt_au_per_myr"].values[0, 0] == pytest.approx(0.05)
    engine(stop_at=2)
    with pytest.raises(KeyboardInterrupt):
        sweep(BODY, OVER, out=tmp_path / "s.h5")
    with pytest.raises(StoreError, match=r"body.bulk.density_kg_m3 was 2000.0, now 1000.0"):
        sweep(other, OVER, out=tmp_path / "s.h5")
    swapped = dict(reversed(OVER.items()))
    with pytest.raises(StoreError, match="over was"):
        sweep(BODY, swapped, out=tmp_path / "s.h5")


def test_a_changed_shape_file_is_another_plan_and_a_moved_one_is_not(engine, tmp_path):
    shape = smallbody.make_shape("sphere", 80)
    for folder in ("a", "b"):
        (tmp_path / folder).mkdir()
        smallbody.write_shape(shape, tmp_path / folder / "x.obj")
    engine(stop_at=2)
    body = BODY.changed({"shape.file": str(tmp_path / "a" / "x.obj"), "shape.diameter_km": 0.5})
    with pytest.raises(KeyboardInterrupt):
        sweep(body, OVER, out=tmp_path / "s.h5")
    moved = body.changed({"shape.file": str(tmp_path / "b" / "x.obj")})
    smallbody.write_shape(shape.scaled(2.0), tmp_path / "b" / "x.obj")
    engine()
    with pytest.raises(StoreError, match="shape_file_sha256"):
        sweep(moved, OVER, out=tmp_path / "s.h5")
    smallbody.write_shape(shape, tmp_path / "b" / "x.obj")
    assert len(engine().calls) == 0
    sweep(moved, OVER, out=tmp_path / "s.h5")


def test_two_sweeps_do_not_write_the_same_file(engine, tmp_path):
    engine()
    with Parts(tmp_path / "s.h5.parts", {"kind": "x"}), pytest.raises(StoreError, match="in use"):
        sweep(BODY, OVER, out=tmp_path / "s.h5")


def test_the_meter_is_told_of_the_cells_that_are_left(engine, tmp_path):
    said = []

    class Meter:
        def start(self, task, total):
            said.append((task, total))

        def step(self, n=1):
            said.append(n)

        def stop(self):
            said.append("stop")

    engine(stop_at=5)
    with pytest.raises(KeyboardInterrupt):
        sweep(BODY, OVER, out=tmp_path / "s.h5", meter=Meter())
    assert said == [("sweep", 12), 1, 1, 1, 1, 1, "stop"]
    said.clear()
    engine()
    sweep(BODY, OVER, out=tmp_path / "s.h5", meter=Meter())
    assert said == [("sweep", 7)] + [1] * 7 + ["stop"]


RUN = """
import sys, warnings
sys.path.insert(0, sys.argv[1])
warnings.simplefilter("ignore")
import smallbody, smallbody.push
from fake_drift import BODY, Engine, not_above
from smallbody.batch import sweep
smallbody.push.drift = Engine(seconds=0.01, fails=not_above(120.0))
sys.modules["smallbody.batch.grid"].COMMIT_S = 0.02
print("ready", flush=True)
try:
    sweep(BODY, {"spin.obliquity_deg": range(0, 180, 9), "surface.thermal_inertia": [50, 1000]}, out=sys.argv[2])
except KeyboardInterrupt:
    sys.exit(130)
"""


@pytest.mark.parametrize("how", [signal.SIGKILL, signal.SIGINT])
def test_a_sweep_stopped_again_and_again_ends_in_the_same_bytes(tmp_path, how):
    def start(out: str) -> subprocess.Popen:
        arguments = [sys.executable, "-c", RUN, str(Path(__file__).parent), str(tmp_path / out)]
        run = subprocess.Popen(arguments, stdout=subprocess.PIPE, text=True)
        assert run.stdout.readline() == "ready\n"
        return run

    assert start("unbroken.h5").wait() == 0
    draw, stops = random.Random(int(how)), 0
    for chance in range(20):
        run = start("s.h5")
        if chance < 4:
            time.sleep(draw.uniform(0.05, 0.3))
            run.send_signal(how)
        if (code := run.wait()) == 0:
            break
        assert code in (-9, 130)
        stops += 1
    assert stops > 0
    assert (tmp_path / "s.h5").read_bytes() == (tmp_path / "unbroken.h5").read_bytes()
    assert sorted(os.listdir(tmp_path)) == ["s.h5", "unbroken.h5"]


def test_a_sweep_of_the_real_engine_gives_what_single_runs_give(tmp_path):
    body = BODY.changed({"solver.light_places": 16, "solver.orbit_places": 8})
    over = {"shape.diameter_km": [0.5, 1.0], "spin.obliquity_deg": [20.0, 120.0]}
    result = sweep(body, over, out=tmp_path / "s.h5")
    assert result.failed == []
    for i, size in enumerate(over["shape.diameter_km"]):
        for j, tilt in enumerate(over["spin.obliquity_deg"]):
            single = smallbody.drift(body.changed({"shape.diameter_km": size, "spin.obliquity_deg": tilt}))
            assert result.arrays["da_dt_au_per_myr"].values[i, j] == pytest.approx(
                single.orbit.da_dt_au_per_myr.value, rel=1e-9
            )
            assert result.arrays["de_dt_per_myr_thermal"].values[i, j] == pytest.approx(
                single.by_source["thermal"].orbit.de_dt_per_myr.value, rel=1e-9
            )
