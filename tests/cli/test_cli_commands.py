"""The commands: what goes to stdout, what to stderr, with which exit code, and in what shape."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
import types
import warnings
from pathlib import Path

import pytest
from click.testing import CliRunner
from fake_cli_result import ADVICE, result

import smallbody.push
from smallbody.cli import COMMANDS, cli
from smallbody.cli.inputs import grid, named_numbers
from smallbody.cli.report import number_in_brackets, number_with_error, share
from smallbody.errors import Note, StoreError

GOOD = """\
name = "pebble"

[shape]
sphere_facets = 80
diameter_km = 0.5

[bulk]
density_kg_m3 = 2000

[surface]
bond_albedo = 0.05
emissivity = 0.9
thermal_inertia = 200

[spin]
period_h = 6.0
obliquity_deg = 30.0

[orbit]
a_au = 1.2
e = 0.1

[solver]
rotation_nodes = 16
orbit_places = 16
light_places = 16
halved_shape = false
"""


@pytest.fixture
def run_toml(tmp_path):
    path = tmp_path / "run.toml"
    path.write_text(GOOD)
    return path


@pytest.fixture
def call(monkeypatch, tmp_path):
    monkeypatch.setenv("SMALLBODY_CACHE", str(tmp_path / "cache"))
    monkeypatch.delenv("SMALLBODY_THREADS", raising=False)

    def run(*words: object):
        done = CliRunner().invoke(cli, [str(word) for word in words], prog_name="smallbody")
        assert done.exception is None or isinstance(done.exception, SystemExit), done.exception
        return done

    return run


@pytest.fixture
def fake_drift(monkeypatch):
    """The engine replaced by one that answers at once, and tells what it was asked."""
    asked = types.SimpleNamespace(bodies=[], answer=result(), before=lambda: None)

    def drift(body, *, meter):
        asked.bodies.append(body)
        asked.before()
        return asked.answer

    monkeypatch.setattr(smallbody.push, "drift", drift)
    return asked


def one_line(done, said: str, code: int = 2) -> None:
    assert done.exit_code == code
    assert done.stdout == ""
    assert done.stderr.startswith("smallbody: ")
    assert done.stderr.count("\n") == 1
    assert said in done.stderr


# --- help -------------------------------------------------------------------------------------------------------
def test_the_list_of_commands_says_what_each_command_says_of_itself(call):
    for name, about in COMMANDS.items():
        done = call(name, "--help")
        assert done.exit_code == 0
        assert about in " ".join(done.stdout.split())
        assert about in " ".join(call("--help").stdout.split())


def test_every_command_takes_the_common_options(call):
    for words in (["drift"], ["sweep"], ["figure"], ["shape"], ["shape", "make"]):
        text = call(*words, "--help").stdout
        assert all(option in text for option in ("-v, --verbose", "-q, --quiet", "--threads N"))


def test_the_help_of_figure_names_every_kind_and_every_choice(call):
    import importlib
    import inspect

    from smallbody.figures import KINDS

    text = call("figure", "--help").stdout
    for module_of in KINDS.values():
        for kind, module in module_of.items():
            assert kind in text
            function = getattr(importlib.import_module(f"smallbody.figures.{module}"), kind)
            for choice in inspect.signature(function).parameters.values():
                if choice.kind is choice.KEYWORD_ONLY:
                    assert f"{choice.name}=" in text


def test_no_words_at_all_show_the_help(call):
    assert call().stdout == call("--help").stdout


# --- drift ------------------------------------------------------------------------------------------------------
def test_drift_prints_rates_with_errors_units_and_causes_in_80_columns(call, run_toml, fake_drift):
    done = call("drift", run_toml)
    assert (done.exit_code, done.stderr) == (0, "")
    text = done.stdout
    assert all(len(row) <= 80 for row in text.split("\n"))
    assert not any(row.endswith(" ") for row in text.split("\n"))
    assert text.startswith("pebble [not bold] :smile:\n")
    rows = {" ".join(row.split()) for row in text.split("\n")}
    assert "orbit semi-major axis -4.103e-4 ± 0.012e-4 au/Myr 0.3 %" in rows
    assert "node undefined deg/Myr" in rows
    assert "semi-major axis -3.693(11)e-4 -0.4103(12)e-4 0 au/Myr" in rows
    assert "Energy out over in 1 - 3.1e-7" in rows
    assert "Overshadowed 12 % of 5,120 facets" in rows
    assert "Rotations in an orbit 1,920" in rows
    assert "Sphere, linear theory da/dt -3.90e-4 au/Myr" in rows
    worth = " ".join(text.partition("Worth doing")[2].split())
    assert worth == ADVICE.replace("da_dt_au_per_myr", "semi-major axis")


def test_a_spin_rate_of_round_off_is_called_so(call, run_toml, fake_drift):
    fake_drift.answer = result(spin=1e-15)
    rows = {" ".join(row.split()) for row in call("drift", run_toml).stdout.split("\n")}
    assert "spin rotation 0 within round-off rad/d2" in rows
    assert "doubling time never Myr" in rows
    fake_drift.answer = result(spin=1e-15, notes=("domega_dt_rad_per_d2: raise solver.rotation_nodes",))
    assert "Worth doing" not in call("drift", run_toml).stdout


def test_drift_in_json_is_one_object_and_undefined_rates_are_null(call, run_toml, fake_drift):
    fake_drift.before = lambda: warnings.warn("mind the gap", Note, stacklevel=1)
    done = call("drift", run_toml, "--json")
    table = json.loads(done.stdout, parse_constant=pytest.fail)
    assert table["orbit"]["dnode_dt_deg_per_myr"] == {"value": None, "numerical_error": None}
    assert table["provenance"]["nothing"] is None
    assert table["orbit"]["da_dt_au_per_myr"]["value"] == -4.10312e-4
    assert done.stderr == "note: mind the gap\n"


def test_changes_reach_the_engine(call, run_toml, fake_drift):
    done = call("drift", run_toml, "--set", "surface.thermal_inertia=77", "--set", "spin.pole_ecliptic_deg=[1, 80]")
    assert done.exit_code == 0
    assert fake_drift.bodies[0].surface.thermal_inertia == 77.0
    assert fake_drift.bodies[0].spin.pole_ecliptic_deg == (1.0, 80.0)


def test_notes_are_said_once_and_not_at_all_when_quiet(call, run_toml, fake_drift):
    def before():
        for _ in range(3):
            warnings.warn("mind\nthe gap", Note, stacklevel=1)

    fake_drift.before = before
    fake_drift.answer = result(notes=("mind the gap", ADVICE))
    done = call("drift", run_toml)
    assert done.stderr == "note: mind the gap\n"
    assert "mind the gap" not in done.stdout
    assert call("drift", run_toml, "-q").stderr == ""
    assert call("-q", "drift", run_toml).stderr == ""
    assert "computed in" in call("drift", run_toml, "-v").stderr


def test_threads_are_handed_on(call, run_toml, fake_drift, monkeypatch):
    seen = []
    monkeypatch.setenv("SMALLBODY_THREADS", "7")
    fake_drift.before = lambda: seen.append(os.environ["SMALLBODY_THREADS"])
    assert call("drift", run_toml, "--threads", 3).exit_code == 0
    assert seen == ["3"]
    one_line(call("drift", run_toml, "--threads", 0), "--threads")


@pytest.mark.parametrize("out", ["missing/r.h5", "folder", "file/r.h5", "/dev/null"])
def test_an_out_that_cannot_be_written_is_found_before_the_work(call, run_toml, fake_drift, tmp_path, out):
    (tmp_path / "folder").mkdir()
    (tmp_path / "file").write_text("")
    one_line(call("drift", run_toml, "--out", tmp_path / out), "--out")
    assert fake_drift.bodies == []


def test_a_folder_that_may_not_be_written_is_found_before_the_work(call, run_toml, fake_drift, tmp_path, monkeypatch):
    def refuse(**_):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("tempfile.mkstemp", refuse)  # root may write anywhere, so permission bits are no test
    one_line(call("drift", run_toml, "--out", tmp_path / "r.h5"), f"cannot write in {tmp_path}: Permission denied")
    assert fake_drift.bodies == []


def test_a_disk_that_fills_up_meanwhile_does_not_cost_the_numbers(call, run_toml, fake_drift, tmp_path, monkeypatch):
    import smallbody.store

    def full(result, path):
        raise StoreError(f"cannot write {path}: No space left on device")

    monkeypatch.setattr(smallbody.store, "save", full, raising=False)
    done = call("drift", run_toml, "--out", tmp_path / "r.h5")
    assert done.exit_code == 2
    assert "semi-major axis" in done.stdout
    assert done.stderr == f"smallbody: cannot write {tmp_path / 'r.h5'}: No space left on device\n"


def test_ctrl_c_is_one_line_and_exit_code_130(call, run_toml, fake_drift):
    def stop():
        raise KeyboardInterrupt

    fake_drift.before = stop
    one_line(call("drift", run_toml), "interrupted", code=130)


def test_a_stopped_sweep_says_how_to_go_on(call, run_toml, tmp_path, monkeypatch):
    import smallbody.batch

    def stop(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(smallbody.batch, "sweep", stop)
    done = call("sweep", run_toml, "--over", "spin.obliquity_deg=0,90", "--out", tmp_path / "s.h5")
    one_line(done, "interrupted; the same command goes on where it stopped", code=130)


def test_running_out_of_memory_is_one_line(call, run_toml, fake_drift):
    def stop():
        raise MemoryError

    fake_drift.before = stop
    one_line(call("drift", run_toml), "not enough memory")


def test_a_fault_of_ours_is_one_line_and_another_exit_code(call, run_toml, fake_drift):
    def fail():
        raise ZeroDivisionError("division by zero")

    fake_drift.before = fail
    one_line(call("drift", run_toml), "ZeroDivisionError: division by zero", code=1)
    assert "Traceback" in call("drift", run_toml, "-v").stderr


# --- faults -----------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("period_h = 6.0", "period_h = -6.0", "run.toml, line 16: spin.period_h = -6.0 must be a number from"),
        ("period_h = 6.0", "period_h = nan", "line 16: spin.period_h = nan must be"),
        ("density_kg_m3 = 2000", "density_kg_m3 = 0", "line 8: bulk.density_kg_m3 = 0 must be"),
        ("thermal_inertia = 200\n", "", "line 10: surface.thermal_inertia is missing"),
        ("e = 0.1", "e = 1.0", "line 21: orbit.e = 1.0 must be a number from 0 to below 0.98: an open orbit"),
        ("[orbit]", "[orbits]", "line 19: [orbits] is not a section: did you mean [orbit]?"),
        ("[orbit]", "[orbit", "line 19: not valid TOML"),
        ("sphere_facets = 80\ndiameter_km = 0.5", 'file = "none.obj"', "none.obj"),
    ],
)
def test_each_fault_of_a_body_file_is_one_line(call, run_toml, old, new, said):
    run_toml.write_text(GOOD.replace(old, new))
    one_line(call("drift", run_toml), said)
    one_line(call("drift", run_toml, "--json"), said)


def test_several_faults_are_a_line_each(call, run_toml):
    run_toml.write_text(GOOD.replace("6.0", "-6.0").replace("2000", "0"))
    done = call("drift", run_toml)
    assert done.exit_code == 2
    rows = done.stderr.splitlines()
    assert [row.partition(": ")[0] for row in rows] == ["smallbody"] * 2
    assert [row.split(", line ")[1][:2] for row in rows] == ["8:", "16"]


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ("drfit x.toml", "no command 'drfit': did you mean drift?"),
        ("xyz", "no command 'xyz': there are shape, drift, sweep, figure"),
        ("--xyz", "No such option"),
        ("drift", "Missing argument 'RUN.toml'"),
        ("drift none.toml", "none.toml: cannot read the body file"),
        ("drift RUN --jsom", "--json"),
        ("drift RUN --set spin.period_h", "must look like section.key=value"),
        ("drift RUN --set spin.perod_h=3", "did you mean period_h?"),
        ("drift RUN --set spin.period_h=0", "as changed: spin.period_h = 0 must be"),
        ("sweep RUN --over spin.obliquity_deg=0:90:30", "Missing option '--out'"),
        ("sweep RUN --out s.h5", "Missing option '--over'"),
        ("sweep RUN --over spin.obliquity_deg --out s.h5", "must look like key=start:stop:step"),
        ("sweep RUN --over spin.obliquity_deg=0:90 --out s.h5", "three numbers"),
        ("sweep RUN --over spin.obliquity_deg=0:90:-30 --out s.h5", "never gets from 0 to 90 by steps of -30"),
        ("sweep RUN --over spin.obliquity_deg=0:90:0 --out s.h5", "never gets from 0 to 90 by steps of 0"),
        ("sweep RUN --over spin.obliquity_deg=0:90:1e-9 --out s.h5", "more than 1000000 values"),
        ("sweep RUN --over spin.obliquity_deg=0,x --out s.h5", "'x' is not a number"),
        ("sweep RUN --over spin.obliquity_deg=0,nan --out s.h5", "'nan' is not a number"),
        ("sweep RUN --over spin.obliquity_deg=0,0 --out s.h5", "has the value 0 twice"),
        ("sweep RUN --over spin.obliquity_deg=0 --over spin.obliquity_deg=1 --out s.h5", "given twice"),
        ("sweep RUN --over spin.obliquity_deg=0:270:30 --out s.h5", "spin.obliquity_deg = 210.0 must be a number"),
        ("sweep RUN --over spin.obliqity_deg=0:90:30 --out s.h5", "did you mean obliquity_deg?"),
        ("sweep RUN --over shape.length_unit=1,2 --out s.h5", 'must be "km" or "m"'),
        ("sweep RUN --over spin.obliquity_deg=0:90:30 --out none/s.h5", "there is no folder"),
        ("figure none.h5", "Missing option '--out'"),
        ("figure none.h5 --out none/f.png", "there is no folder"),
        ("figure none.h5 --set out=x --out f.png", "out is not a choice of a picture"),
        ("figure none.h5 --out f.png", "none.h5"),
        ("figure none.h5 --out f.gif", ".gif"),
        ("figure none.h5 --set x --out f.png", "'x' must look like name=value"),
        ("shape", "give a shape file to look over"),
        ("shape -v", "give a shape file to look over"),
        ("shape none.obj", "none.obj"),
        ("shape none.obj --out none/f.obj", "there is no folder"),
        ("shape make", "Missing argument 'KIND'"),
        ("shape make top --out f.obj", "Missing option '--facets'"),
        ("shape make top --facets 100", "Missing option '--out'"),
        ("shape make tap --facets 100 --out f.obj", "did you mean 'top'?"),
        ("shape make top --facets -5 --out f.obj", "facets"),
        ("shape make top --facets 100 --set ridge --out f.obj", "'ridge' must look like name=value"),
        ("shape make top --facets 100 --set ridge=9 --out f.obj", "ridge"),
        ("shape make top --facets 100 --set rdge=0.5 --out f.obj", "did you mean 'ridge'?"),
        ("shape make top --facets 100 --set seed=5 --out f.obj", "see --seed"),
        ("shape make top --facets 100 --out f.xyz", ".xyz"),
    ],
)  # fmt: skip
def test_a_wrong_call_is_one_line_that_names_what_is_wrong(call, run_toml, monkeypatch, words, said):
    monkeypatch.chdir(run_toml.parent)
    one_line(call(*words.replace("RUN", "run.toml").split()), said)
    assert {path.name for path in run_toml.parent.iterdir()} <= {"run.toml", "cache"}  # nothing half written


def test_the_shell_sees_exit_code_2_and_no_traceback(run_toml):
    run_toml.write_text(GOOD.replace("e = 0.1", "e = 1.5"))
    for words in (["drift", str(run_toml)], ["drift", "/dev/null"], ["drift", "/"], ["shape", "/dev/null"], ["figure"]):
        run = subprocess.run([sys.executable, "-m", "smallbody.cli", *words], capture_output=True, text=True)
        assert run.returncode == 2
        assert run.stdout == ""
        assert run.stderr.startswith("smallbody: ")
        assert run.stderr.count("\n") == 1


def test_a_pipe_that_closes_is_no_traceback(run_toml):
    command = f"{sys.executable} -m smallbody.cli shape make --help | true"
    run = subprocess.run(["bash", "-c", command], capture_output=True, text=True)
    assert run.stderr == ""


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no /dev/full to write to")
def test_a_full_disk_behind_stdout_is_one_line(run_toml):
    command = f"{sys.executable} -m smallbody.cli drift {run_toml} --json > /dev/full"
    run = subprocess.run(["bash", "-c", command], capture_output=True, text=True)
    assert (run.returncode, run.stderr) == (2, "smallbody: No space left on device\n")


RUNS = sorted((Path(__file__).parents[2] / "runs").glob("*.toml"))


@pytest.mark.parametrize("path", RUNS, ids=lambda path: path.stem)
def test_every_run_description_of_the_project_is_good_and_earns_no_note(path):
    from smallbody.body import read_body

    with warnings.catch_warnings():
        warnings.simplefilter("error", Note)
        body = read_body(path)
    assert body.shape.file.is_file()
    assert len(RUNS) >= 6


# --- inputs -----------------------------------------------------------------------------------------------------
def test_steps_include_the_stop_they_land_on_and_carry_no_round_off():
    assert grid("--over", ["a=0:180:60", "b=1,2.5", "c=0.1:0.5:0.1", "d=3:1:-1", "e=0:1:0.3", "f=5:5:1"]) == {
        "a": [0.0, 60.0, 120.0, 180.0],
        "b": [1.0, 2.5],
        "c": [0.1, 0.2, 0.3, 0.4, 0.5],
        "d": [3.0, 2.0, 1.0],
        "e": [0.0, 0.3, 0.6, 0.9],
        "f": [5.0],
    }


def test_names_may_have_numbers_lists_flags_and_texts():
    settings = ["a=1", "b=0.5", "c=3,2,1", "d=[3, 2]", "e=true", "f=front", "g-h=1e3", "i=front, back,"]
    assert named_numbers("--set", settings) == {
        "a": 1,
        "b": 0.5,
        "c": [3, 2, 1],
        "d": [3, 2],
        "e": True,
        "f": "front",
        "g_h": 1000.0,
        "i": ["front", "back"],
    }


# --- numbers ----------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(
    ("value", "error", "long", "short"),
    [
        (-4.10312e-4, 1.23e-6, "-4.103e-4 ± 0.012e-4", "-4.103(12)e-4"),
        (61.38, 0.184, "+61.38 ± 0.18", "+61.38(18)"),
        (61.38, 18.4, "+61 ± 18", "+61(18)"),
        (9.99e-4, 2e-3, "+1.0e-3 ± 2.0e-3", "+10(20)e-4"),
        (0.0, 0.0, "0 ± 0", "0"),
        (-123456.7, 370.0, "-1.2346e5 ± 0.0037e5", "-1.2346(37)e5"),
        (1.0, 1e-12, "+1.000000 ± 0.000000", "+1.000000(0)"),
        (float("nan"), float("nan"), "undefined", "undefined"),
        (float("inf"), 1.0, "undefined", "undefined"),
        (5.0, float("inf"), "+5", "+5"),
    ],
)
def test_numbers_show_the_digits_that_their_error_leaves_standing(value, error, long, short):
    assert number_with_error(value, error) == long
    assert number_in_brackets(value, error, abs(value)) == short


def test_what_is_small_beside_the_rest_of_its_row_looks_small():
    assert number_in_brackets(-4.1e-6, 1e-8, 4e-4) == "-0.04100(10)e-4"
    assert number_in_brackets(3e-15, 1e-15, 4e-4) == "0"
    assert number_in_brackets(3e-6, 1e-6, 4e-4, nothing=1e-5) == "0"


def test_shares_are_short():
    assert [share(x) for x in (0.0, 5e-6, 1e-7, 0.0049, 0.123, 5.0, 12.0, float("nan"))] == [
        "0 %", "< 0.001 %", "< 0.001 %", "0.5 %", "12 %", "500 %", "> 999 %", "",
    ]  # fmt: skip


# --- the real engine --------------------------------------------------------------------------------------------
RATES = {
    "orbit": {
        "da_dt_au_per_myr", "da_dt_m_per_yr", "de_dt_per_myr", "di_dt_deg_per_myr", "dnode_dt_deg_per_myr",
        "dperi_dt_deg_per_myr",
    },
    "spin": {"domega_dt_rad_per_d2", "dobliquity_dt_deg_per_myr", "dazimuth_dt_deg_per_myr", "doubling_time_myr"},
}  # fmt: skip


def test_the_json_of_a_real_run_keeps_the_contract(call, run_toml):
    done = call("drift", run_toml, "--json")
    assert done.exit_code == 0
    table = json.loads(done.stdout, parse_constant=pytest.fail)
    assert table["name"] == "pebble"
    for part in (table, *(table["by_source"][source] for source in ("thermal", "scattered", "direct"))):
        for section, keys in RATES.items():
            assert keys <= set(part[section])
            assert all(set(part[section][key]) == {"value", "numerical_error"} for key in keys)
    assert {"a1_au_per_d2", "a2_au_per_d2", "a3_au_per_d2", "area_to_mass_m2_per_kg", "beta"} <= set(
        table["acceleration"]
    )
    assert {"energy_balance", "facets", "overshadowed_fraction", "rotations_per_orbit"} <= set(table["checks"])
    assert table["checks"]["facets"] == 80
    assert table["orbit"]["dnode_dt_deg_per_myr"]["value"] is None  # the orbit lies in the ecliptic
    assert table["orbit"]["da_dt_au_per_myr"]["value"] > 0.0  # prograde: outwards (common practice)


def test_a_real_run_is_shown_kept_and_read_back(call, run_toml, tmp_path):
    from smallbody.store import load

    out = tmp_path / "r.h5"
    done = call("drift", run_toml, "--out", out)
    assert done.exit_code == 0
    assert "semi-major axis" in done.stdout
    assert f"written: {out}\n" in done.stderr
    stored = load(out)
    assert stored.kind == "drift"
    assert stored.attrs["name"] == "pebble"


def test_ctrl_c_in_the_shell_is_one_line_and_130(run_toml):
    slow = GOOD.replace("sphere_facets = 80", "sphere_facets = 200000").replace(
        "rotation_nodes = 16", "rotation_nodes = 256"
    )
    run_toml.write_text(slow)
    words = [sys.executable, "-m", "smallbody.cli", "drift", str(run_toml), "--threads", "1"]
    process = subprocess.Popen(words, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    time.sleep(4.0)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=120)
    assert (process.returncode, out, err) == (130, "", "smallbody: interrupted\n")


def test_a_shape_is_made_looked_over_and_written_in_another_format(call, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    done = call(
        "shape", "make", "top", "--facets", 320, "--out", "top.obj", "--set", "ridge=0.5", "--set", "diameter_km=0.4"
    )
    assert done.exit_code == 0
    assert Path("top.obj").read_text().count("\nf ") == 320
    looked = call("shape", "top.obj", "--out", "top.stl")
    assert looked.exit_code == 0
    assert Path("top.stl").stat().st_size > 320 * 50
    text = " ".join(looked.stdout.split())
    assert "top.obj" in text
    assert "320" in text
    assert "overshadowed" in text
    again = call(
        "shape", "make", "top", "--facets", 320, "--out", "same.obj", "--set", "ridge=0.5", "--set", "diameter_km=0.4"
    )
    assert again.exit_code == 0
    assert Path("same.obj").read_bytes() == Path("top.obj").read_bytes()


def test_a_file_called_make_is_reached_by_its_path(call, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    Path("make").write_text("v 0 0 0\nv 1 0 0\nv 0 1 0\nv 0 0 1\nf 1 3 2\nf 1 2 4\nf 1 4 3\nf 2 3 4\n")
    done = call("shape", "./make", "--length-unit", "m", "-v")
    assert done.exit_code == 0
    assert "facets" in done.stdout


def test_an_open_shape_is_refused_with_what_is_wrong(call, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    Path("open.obj").write_text("v 0 0 0\nv 1 0 0\nv 0 1 0\nv 0 0 1\nf 1 3 2\nf 1 2 4\nf 1 4 3\n")
    one_line(call("shape", "open.obj"), "open.obj: 3 edges belong to one facet only")


def test_mending_says_what_it_did(call, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    Path("inside.obj").write_text("v 0 0 0\nv 1 0 0\nv 0 1 0\nv 0 0 1\nf 1 2 3\nf 1 4 2\nf 1 3 4\nf 2 4 3\n")
    one_line(call("shape", "inside.obj"), "inside.obj")
    done = call("shape", "inside.obj", "--mend", "--out", "out.obj")
    assert done.exit_code == 0
    assert "mended: " in done.stdout
    assert call("shape", "out.obj").exit_code == 0


def test_a_sweep_and_its_figure_come_from_the_command_line(call, run_toml, tmp_path):
    from smallbody.store import load

    out, picture = tmp_path / "s.h5", tmp_path / "f.png"
    done = call(
        "sweep",
        run_toml,
        "--over",
        "spin.obliquity_deg=0:180:90",
        "--over",
        "surface.thermal_inertia=50,200",
        "--out",
        out,
    )
    assert done.exit_code == 0
    assert done.stdout == f"{out}\n"
    rates = load(out).arrays["da_dt_au_per_myr"]
    assert rates.dims == ("spin_obliquity_deg", "surface_thermal_inertia")
    assert (rates.values[0] > 0).all()
    assert (rates.values[2] < 0).all()  # retrograde: inwards (common practice)
    assert call("figure", out, "--out", picture).exit_code == 0
    assert picture.read_bytes().startswith(b"\x89PNG")
    assert call("figure", out, "--out", picture.with_suffix(".svg"), "--set", "spin.obliquity_deg=90").exit_code == 0
    assert "<svg" in picture.with_suffix(".svg").read_text()
    one_line(call("figure", out, "temperature", "--out", picture), "no picture 'temperature' of a sweep")


def test_an_error_that_rounds_up_to_a_power_of_ten_keeps_two_digits():
    from smallbody.cli.report import number_in_brackets, number_with_error

    assert number_in_brackets(0.136202, 9.96e-5, size=0.2) == "+0.13620(10)"
    assert number_with_error(1.5, 0.0996) == "+1.50 ± 0.10"
