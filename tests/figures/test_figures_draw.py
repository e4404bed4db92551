"""Pictures show what the file holds, with units, nothing over anything else, and fail in one line."""

import itertools
import subprocess
import sys
import warnings

import matplotlib
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import PolyCollection, QuadMesh
from matplotlib.colors import to_hex
from matplotlib.figure import Figure

import smallbody
from smallbody.body import Body, Bulk, Orbit, ShapeSource, Solver, Spin, Surface
from smallbody.errors import FigureError, Note, StoreError
from smallbody.figures import curves, draw, maps
from smallbody.figures.frame import typeset
from smallbody.quantity import Quantity
from smallbody.store import Stored, load, save

BODY = Body(
    name="costs $5 or $6",
    shape=ShapeSource(ellipsoid_axes=(0.3, 0.22, 0.2), facets=320),
    bulk=Bulk(density_kg_m3=2000.0),
    surface=Surface(bond_albedo=0.05, emissivity=0.9, thermal_inertia=200.0),
    spin=Spin(period_h=5.0, obliquity_deg=40.0, pole_azimuth_deg=70.0),
    orbit=Orbit(a_au=1.3, e=0.3),
    solver=Solver(lit_samples=1, rotation_nodes=32, light_places=48, orbit_places=16, halved_shape=False),
)
KINDS = ("temperature", "light", "rotation", "season")


@pytest.fixture(scope="module")
def real() -> Stored:
    """A real result, as a file gives it."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", Note)
        result = smallbody.drift(BODY)
    return Stored("drift", result.arrays, {"name": result.name})


def grid(missing: bool = False, **over: list[float]) -> Stored:
    """A sweep from plain formulas."""
    dims = tuple(over)
    shape = tuple(len(v) for v in over.values())
    units = {"spin_obliquity_deg": "deg", "surface_thermal_inertia": "J m-2 K-1 s-1/2", "orbit_e": "1"}
    arrays = {d: Quantity(np.array(v, float), (d,), units[d], d) for d, v in over.items()}
    mesh = dict(zip(dims, np.meshgrid(*over.values(), indexing="ij")))
    tilt = np.radians(mesh.get("spin_obliquity_deg", np.zeros(shape)))
    size = np.log10(mesh.get("surface_thermal_inertia", np.full(shape, 100.0)) + 1) * (
        1 + mesh.get("orbit_e", 0 * tilt)
    )
    rates = {
        "da_dt_au_per_myr": ("au/Myr", 1e-3 * np.cos(tilt) * size),
        "domega_dt_rad_per_d2": ("rad/d2", -1e-7 * (3 * np.cos(tilt) ** 2 - 1) + 0 * size),
        "dobliquity_dt_deg_per_myr": ("deg/Myr", 300 * np.sin(2 * tilt) * size),
    }
    error = np.full(shape, "", object)
    if missing:
        error.flat[1] = "did not settle"
    for name, (unit, value) in rates.items():
        value = np.where(error == "", value, np.nan)
        arrays[name] = Quantity(value, dims, unit, name)
        arrays[f"{name}_error"] = Quantity(np.abs(value) * 0.02, dims, unit, name)
        for source, share in (("thermal", 0.8), ("scattered", 0.2), ("direct", 0.0)):
            arrays[f"{name}_{source}"] = Quantity(value * share, dims, unit, name)
    arrays["sphere_da_dt_au_per_myr"] = Quantity(0.9 * rates["da_dt_au_per_myr"][1], dims, "au/Myr", "sphere")
    arrays["spin_scale_rad_per_d2"] = Quantity(np.full(shape, 1e-5), dims, "rad/d2", "scale")
    arrays["error"] = Quantity(error, dims, "", "fault")
    return Stored("sweep", arrays, {"name": "costs $5 or $6"})


TILTS = [0.0, 30.0, 60.0, 90.0, 120.0, 150.0, 180.0]
SWEEPS = {
    "one": (grid(spin_obliquity_deg=TILTS), {}),
    "family": (grid(spin_obliquity_deg=TILTS, surface_thermal_inertia=[10.0, 50.0, 200.0, 1000.0]), {}),
    "map": (grid(spin_obliquity_deg=np.linspace(0, 180, 9), surface_thermal_inertia=np.geomspace(1, 1000, 12)), {}),
    "cut": (grid(spin_obliquity_deg=TILTS, surface_thermal_inertia=[0.0, 10.0, 1000.0]), {"spin_obliquity_deg": 30.0}),
    "three": (grid(spin_obliquity_deg=TILTS, orbit_e=[0.0, 0.5], surface_thermal_inertia=[10.0, 50.0, 90.0]), {}),
    "missing": (grid(True, spin_obliquity_deg=TILTS), {"rates": "da_dt_au_per_myr"}),
}


def every_picture(real: Stored) -> dict[str, tuple[Stored, str, dict]]:
    pictures = {kind: (real, kind, {}) for kind in KINDS}
    pictures["turned"] = (real, "temperature", {"phase_deg": [0, 90], "views": ["front", "morning", "north"]})
    pictures["single"] = (real, "light", {"views": "evening"})
    pictures["phase"] = (real, "rotation", {"against": "phase", "facets": [0, 5, 100]})
    return pictures | {f"rates {k}": (stored, "rates", choices) for k, (stored, choices) in SWEEPS.items()}


PICTURES = [*KINDS, "turned", "single", "phase", *(f"rates {k}" for k in SWEEPS)]


@pytest.fixture(params=PICTURES)
def picture(request, real) -> Figure:
    stored, kind, choices = every_picture(real)[request.param]
    return draw(stored, kind, **choices)


def texts(figure: Figure) -> list[tuple[str, object]]:
    """All texts that show, and where they are, in pixels."""
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    beyond = set()  # labels of ticks past the ends of their axis are made, but not drawn
    for axes in figure.findobj(matplotlib.axes.Axes):
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            slack = 1e-9 * (high - low)
            for tick in [*axis.get_major_ticks(), *axis.get_minor_ticks()]:
                if not axes.axison or not low - slack <= tick.get_loc() <= high + slack:
                    beyond |= {tick.label1, tick.label2}
    return [
        (text.get_text(), text.get_window_extent(canvas.get_renderer()))
        for text in figure.findobj(matplotlib.text.Text)
        if text.get_visible() and text.get_text().strip() and text not in beyond
    ]


def test_no_text_lies_over_another_or_off_the_page(picture):
    page = picture.bbox
    shown = texts(picture)
    assert len(shown) > 4
    for text, box in shown:
        assert box.x0 >= page.x0 - 0.5, text
        assert box.y0 >= page.y0 - 0.5, text
        assert box.x1 <= page.x1 + 0.5, text
        assert box.y1 <= page.y1 + 0.5, text
    for (one, a), (other, b) in itertools.combinations(shown, 2):
        over = min(a.x1, b.x1) - max(a.x0, b.x0), min(a.y1, b.y1) - max(a.y0, b.y0)
        assert min(over) < 1.5, f"{one!r} lies over {other!r}"


def test_every_axis_that_has_a_dimension_says_its_unit(picture):
    labels = [a.get_label_text() for axes in picture.axes for a in (axes.xaxis, axes.yaxis) if axes.axison]
    said = [label for label in labels if label]
    assert said
    for label in said:
        assert label in ("Eccentricity",) or label.rstrip().endswith(")"), label


def test_a_picture_is_as_wide_as_a_column_or_a_page(picture):
    wide, high = picture.get_size_inches()
    assert 3.4 <= wide <= 7.2
    assert high <= 9.5


def test_the_smallest_type_can_be_read_in_print(picture):
    sizes = [t.get_fontsize() for t in picture.findobj(matplotlib.text.Text) if t.get_text().strip()]
    assert min(sizes) >= 6.0  # points; common practice of the journals is 6 to 8


@pytest.mark.parametrize("ending", ["png", "pdf", "svg"])
@pytest.mark.parametrize("kind", ["temperature", "season"])
def test_each_ending_gives_its_format_and_the_same_bytes_again(real, tmp_path, ending, kind):
    start = {"png": b"\x89PNG", "pdf": b"%PDF", "svg": b"<?xml"}[ending]
    made = []
    for name in "ab":
        draw(real, kind, tmp_path / f"{name}.{ending.upper()}")
        made.append((tmp_path / f"{name}.{ending.upper()}").read_bytes())
    assert made[0].startswith(start)
    assert len(made[0]) > 5000
    assert made[0] == made[1]


def test_pictures_of_files_equal_pictures_of_results(real, tmp_path):
    save(real, tmp_path / "r.h5")
    draw(tmp_path / "r.h5", "season", tmp_path / "file.png")
    draw(real, "season", tmp_path / "result.png")
    assert (tmp_path / "file.png").read_bytes() == (tmp_path / "result.png").read_bytes()


def test_nothing_is_left_in_pyplot_nor_in_the_user_s_settings(real):
    before = dict(matplotlib.rcParams)
    with matplotlib.rc_context({"text.usetex": True, "font.size": 30.0}):  # usetex would need LaTeX
        assert draw(real, "season").axes[0].yaxis.label.get_fontsize() == 8.0
        assert matplotlib.rcParams["font.size"] == 30.0
    assert dict(matplotlib.rcParams) == before
    code = "import sys, smallbody.figures.curves, smallbody.figures.maps, smallbody.figures.rates"
    code += "; assert 'matplotlib.pyplot' not in sys.modules"
    subprocess.run([sys.executable, "-c", code], check=True)


# what is in the pictures


def test_the_front_view_shows_the_facets_that_face_the_sun_in_their_colours(real):
    figure = draw(real, "temperature", views="front")
    drawn = next(c for c in figure.axes[0].collections if isinstance(c, PolyCollection))
    sun = maps.sun_directions(real)[0]
    corners = real.arrays["vertex_m"].values[real.arrays["facet_vertex"].values]
    normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    facing = np.flatnonzero(normals @ sun > 0)
    assert len(drawn.get_facecolors()) == len(facing)
    temperature = real.arrays["facet_temperature_k"].values[:, 0]
    norm = matplotlib.colors.Normalize(temperature.min(), temperature.max())
    paint = matplotlib.colormaps["inferno"]
    order = facing[np.argsort(corners[facing].mean(axis=1) @ sun, kind="stable")]
    want = [to_hex(paint(norm(t))) for t in temperature[order]]
    assert [to_hex(c) for c in drawn.get_facecolors()] == want


def test_light_in_the_front_view_is_brightest_and_in_the_back_view_is_none(real):
    front, back = (draw(real, "light", views=v).axes[0].collections[0] for v in ("front", "back"))
    dark = to_hex(matplotlib.colormaps["cividis"](0.0))
    assert all(to_hex(c) == dark for c in back.get_facecolors())
    assert np.mean([to_hex(c) == dark for c in front.get_facecolors()]) < 0.1


def test_the_sun_climbs_over_the_morning_side_and_sinks_over_the_evening_side(real):
    suns = maps.sun_directions(real)
    for view, sign in (("morning", 1), ("evening", -1)):
        towards, _ = maps._viewer(view, suns[0])
        climb = suns[1] @ towards - suns[0] @ towards
        assert climb * sign > 0.05


@pytest.mark.parametrize("view", maps.VIEWS)
def test_views_are_right_handed_and_north_is_up_where_it_can_be(view, real):
    sun = maps.sun_directions(real)[3]
    towards, up = maps._viewer(view, sun)
    assert abs(towards @ up) < 1e-12
    assert np.linalg.norm(up) == pytest.approx(1.0)
    if view not in ("north", "south"):
        assert up[2] > 0.5
    right = np.cross(up, towards)
    assert np.cross(right, up) @ towards == pytest.approx(1.0)


def test_views_from_over_a_pole_with_the_sun_over_it_can_be_drawn(real):
    arrays = dict(real.arrays)
    old = arrays["place_subsolar_latitude_deg"]
    arrays["place_subsolar_latitude_deg"] = Quantity(np.full_like(old.values, 90.0), old.dims, old.units, old.about)
    draw(Stored("drift", arrays, {"name": "x"}), "temperature", views=list(maps.VIEWS))


def test_the_scale_bar_is_as_long_as_it_says(real):
    figure = draw(real, "temperature")
    bar = next(axes for axes in figure.axes if any(" m" in t.get_text() or "km" in t.get_text() for t in axes.texts))
    metres = float(bar.texts[0].get_text().split()[0])
    inches = bar.get_position().width * figure.get_size_inches()[0]
    per_inch = (bar.get_xlim()[1] - bar.get_xlim()[0]) / inches
    assert np.ptp(bar.lines[0].get_xdata()) == pytest.approx(metres)
    for panel in figure.axes[:4]:
        wide = panel.get_position().width * figure.get_size_inches()[0]
        assert np.ptp(panel.get_xlim()) / wide == pytest.approx(per_inch, rel=1e-6)
        high = panel.get_position().height * figure.get_size_inches()[1]
        assert np.ptp(panel.get_ylim()) / high == pytest.approx(per_inch, rel=1e-6)


def test_light_peaks_at_local_noon_and_heat_after_it(real):
    figure = draw(real, "rotation", facets=[int(np.argmax(np.abs(normals(real)[:, 0])))])
    light, heat = figure.axes[:2]
    step = 360 / 32
    for panel, low, high in ((light, -step / 2, step / 2), (heat, step / 2, 90.0)):
        x, y = panel.lines[0].get_data()
        seen = (x >= -180) & (x <= 180)
        assert low - 1e-9 <= x[seen][np.argmax(y[seen])] <= high + 1e-9


def test_the_curve_through_a_rotation_has_no_gap_and_that_of_a_slow_rotator_no_false_end():
    angle = 33.0 + np.arange(64) * 360 / 64
    x, y = curves._round(angle, np.cos(np.radians(angle)), -180.0)
    seen = (x >= -180 - 6) & (x <= 180 + 6)  # the whole axis, up to the points just beyond it
    np.testing.assert_allclose(y[seen], np.cos(np.radians(x[seen])), atol=1e-12)
    assert np.max(np.diff(np.sort(x[seen]))) < 360 / 64 + 1e-9
    assert x[seen].min() <= -180
    assert x[seen].max() >= 180
    slow = 33.0 + np.arange(64) * 300 / 64  # the Sun went along for a sixth of the way
    x, y = curves._round(slow, slow, -180.0)
    steps = np.diff(x)
    np.testing.assert_allclose(steps[np.isfinite(steps)], 300 / 64)


def normals(stored: Stored) -> np.ndarray:
    a, b, c = np.moveaxis(stored.arrays["vertex_m"].values[stored.arrays["facet_vertex"].values], 1, 0)
    n = np.cross(b - a, c - a)
    return n / np.linalg.norm(n, axis=1, keepdims=True)


def test_the_season_has_each_source_with_a_line_of_its_own_once_round(real):
    panels = draw(real, "season").axes[:3]
    force = real.arrays["force_n"].values
    for k, panel in enumerate(panels):
        lines = {
            line.get_label(): line for line in panel.lines if line.get_label() in ("thermal", "scattered", "direct")
        }
        assert len({line.get_linestyle() for line in lines.values()}) == 3
        x, y = lines["thermal"].get_data()
        assert x[-1] - x[0] >= 360
        assert np.all(np.diff(x) > 0)
        factor = np.max(np.abs(y)) / np.max(np.abs(force[0, :, k]))
        assert factor == pytest.approx(10 ** round(np.log10(factor)))
        np.testing.assert_allclose(np.sort(y[1:-1]), np.sort(force[0, :, k] * factor), rtol=1e-12)


def test_rates_are_drawn_with_their_errors_and_their_sources():
    stored, _ = SWEEPS["one"]
    panels = draw(stored).axes
    for panel, name in zip(panels, ("da_dt_au_per_myr", "domega_dt_rad_per_d2", "dobliquity_dt_deg_per_myr")):
        total = panel.containers[0]
        x, y = total.lines[0].get_data()
        value = stored.arrays[name].values
        factor = np.nanmax(np.abs(y)) / np.abs(value).max()
        np.testing.assert_allclose(x, TILTS)
        np.testing.assert_allclose(y, value * factor, atol=1e-12 * np.abs(y).max())
        bars = np.array([np.ptp(segment[:, 1]) for segment in total.lines[2][0].get_segments()])
        np.testing.assert_allclose(bars, 2 * 0.02 * np.abs(value) * factor, atol=1e-9 * np.abs(y).max())
        lines = {line.get_label(): line for line in panel.lines}
        np.testing.assert_allclose(lines["thermal"].get_ydata(), 0.8 * y, atol=1e-9 * np.abs(y).max())
        looks = {(lines[s].get_linestyle(), lines[s].get_marker()) for s in ("thermal", "scattered", "direct")}
        assert len(looks) == 3


def test_the_lines_of_a_family_differ_by_more_than_colour():
    stored, _ = SWEEPS["family"]
    panel = draw(stored).axes[0]
    lines = [container.lines[0] for container in panel.containers]
    assert len(lines) == 4
    assert len({line.get_marker() for line in lines}) == 4
    assert len({str(line._unscaled_dash_pattern) for line in lines}) == 4
    assert len({to_hex(line.get_color()) for line in lines}) == 4
    value = stored.arrays["da_dt_au_per_myr"].values
    for j, line in enumerate(lines):
        np.testing.assert_allclose(line.get_ydata() * value[0, 0] / lines[0].get_ydata()[0], value[:, j], atol=1e-12)


def test_many_values_of_two_inputs_are_a_map_whose_white_is_zero():
    stored, _ = SWEEPS["map"]
    panel = draw(stored).axes[0]
    mesh = next(c for c in panel.collections if isinstance(c, QuadMesh))
    assert panel.get_xscale() == "log"
    assert mesh.norm.vmin == -mesh.norm.vmax
    value = stored.arrays["da_dt_au_per_myr"].values
    drawn = np.asarray(mesh.get_array())
    assert drawn.shape == (9, 12)
    np.testing.assert_allclose(drawn / np.abs(drawn).max(), value / np.abs(value).max(), atol=1e-12)


def test_inputs_in_falling_order_make_the_same_picture(tmp_path):
    for name, order in (("up", 1), ("down", -1)):
        draw(grid(spin_obliquity_deg=TILTS[::order], orbit_e=[0.0, 0.3][::order]), out=tmp_path / f"{name}.png")
    assert (tmp_path / "up.png").read_bytes() == (tmp_path / "down.png").read_bytes()


def test_what_is_held_and_what_is_missing_is_said(real):
    said = {k: draw(s, "rates", **c).get_suptitle() for k, (s, c) in SWEEPS.items()}
    assert said["missing"] == "costs $5 or $6, 1 cell missing"
    assert said["cut"] == "costs $5 or $6, obliquity 30 deg"
    assert said["three"] == "costs $5 or $6, eccentricity 0"


def test_an_unfinished_sweep_is_drawn_from_its_folder(tmp_path, monkeypatch):
    calls = itertools.count()
    real_drift = smallbody.push.drift

    def stops(*a, **k):
        if next(calls) == 2:
            raise KeyboardInterrupt
        return real_drift(*a, **k)

    monkeypatch.setattr("smallbody.push.drift", stops)
    with pytest.raises(KeyboardInterrupt):
        smallbody.sweep(BODY, {"spin.obliquity_deg": [0.0, 60.0, 120.0]}, out=tmp_path / "s.h5")
    figure = draw(tmp_path / "s.h5.parts", out=tmp_path / "s.png")
    assert figure.get_suptitle() == "costs $5 or $6, 1 cell missing"
    assert (tmp_path / "s.png").exists()


# what cannot be drawn


@pytest.mark.parametrize(("kind", "choices", "words"), [
    ("heat", {}, "no picture 'heat' of a drift; there are temperature, light, rotation, season"),
    ("rates", {}, "no picture 'rates' of a drift"),
    ("season", {"views": 1}, "season has no choice 'views'; it has none"),
    ("light", {"facets": 1}, "light has no choice 'facets'; it has views, phase_deg, colours, low, high"),
    ("light", {"views": "top"}, "no view 'top'; there are front, back"),
    ("light", {"views": []}, "from 1 to 48 panels"),
    ("light", {"colours": "rainbows"}, "no colours 'rainbows'"),
    ("light", {"colours": ["a"]}, "no colours"),
    ("light", {"phase_deg": "noon"}, "phase_deg: 'noon' is not a number"),
    ("light", {"phase_deg": float("nan")}, "is not a number"),
    ("light", {"low": "x"}, "low: 'x' is not a number"),
    ("light", {"low": 10.0, "high": 5.0}, "low"),
    ("rotation", {"facets": 320}, "320 is not a number of a facet, 0 to 319"),
    ("rotation", {"facets": 1.5}, "1.5 is not"),
    ("rotation", {"facets": list(range(9))}, "from 1 to 8"),
    ("rotation", {"against": "time"}, "there are hour_angle and phase"),
])  # fmt: skip
def test_a_choice_that_a_drift_s_picture_does_not_have_is_told_in_one_line(real, kind, choices, words):
    with pytest.raises(FigureError, match=words.replace("(", r"\(")) as caught:
        draw(real, kind, **choices)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(("kind", "choices", "words"), [
    ("season", {}, "no picture 'season' of a sweep; there are rates"),
    (None, {"rates": "speed"}, "no rate 'speed' in this file; it has da_dt_au_per_myr"),
    (None, {"rates": []}, "from 1 to 6"),
    (None, {"rates": 5}, "no rate 5"),
    (None, {"x": "orbit_e"}, "no 'orbit_e' to draw against; there are spin_obliquity_deg"),
    (None, {"orbit_e": 0.1}, "no choice 'orbit_e'; it has rates, x, as_map, sphere, spin_obliquity_deg"),
    (None, {"spin_obliquity_deg": 31.0}, "no 31.0 in this file; there are 0, 30, 60"),
    (None, {"spin_obliquity_deg": 30.0, "surface_thermal_inertia": 10.0}, "none is left to draw against"),
])  # fmt: skip
def test_a_choice_that_a_sweep_s_picture_does_not_have_is_told_in_one_line(kind, choices, words):
    with pytest.raises(FigureError, match=words) as caught:
        draw(SWEEPS["family"][0], kind, **choices)
    assert "\n" not in str(caught.value)


def test_other_endings_and_other_files_are_told_and_nothing_is_written(real, tmp_path):
    for name in ("a.gif", "a", "a.png.txt"):
        with pytest.raises(FigureError, match=r"ends in \.png, \.pdf or \.svg"):
            draw(real, "season", tmp_path / name)
    with pytest.raises(StoreError, match="there is no folder"):
        draw(real, "season", tmp_path / "no" / "a.png")
    with pytest.raises(StoreError, match="there is no file"):
        draw(tmp_path / "no.h5")
    with pytest.raises(StoreError, match="not the folder of an unfinished run"):
        draw(tmp_path)
    with pytest.raises(FigureError, match="no pictures of a result of kind 'series'"):
        draw(Stored("series", {}))
    bare = Stored("drift", {k: v for k, v in real.arrays.items() if k != "force_n"})
    with pytest.raises(FigureError, match="has no force_n"):
        draw(bare, "season")
    assert list(tmp_path.iterdir()) == []


def test_units_are_printed_with_raised_powers():
    assert typeset("J m-2 K-1 s-1/2") == "J m$^{-2}$ K$^{-1}$ s$^{-1/2}$"
    assert typeset("kg/m3") == "kg m$^{-3}$"
    assert typeset("1/Myr") == "Myr$^{-1}$"
    assert typeset("deg") == "deg"
    assert typeset("1") == ""


def test_real_results_saved_and_loaded_have_the_name_of_the_body(real, tmp_path):
    save(real, tmp_path / "r.h5")
    assert draw(load(tmp_path / "r.h5"), "rotation").get_suptitle() == "costs $5 or $6, at perihelion"
