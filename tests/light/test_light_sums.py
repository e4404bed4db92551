"""What sunlight the facets receive: means against counting, twins, silhouettes, and what must vanish."""

from dataclasses import replace
from itertools import pairwise

import naive_light as naive
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad

from smallbody.light import (
    horizons_of,
    light_sums,
    lit_cosines,
    lit_latitudes,
    no_shadows,
    places_in_true_anomaly,
    sun_on_body,
)
from smallbody.light._sunlight import _day, _rank
from smallbody.shape import Shape, make_shape
from smallbody.workers import thread_count

SUMS = ("lambert", "lever", "across", "lit_lever")


def sun_at(sin_latitude):
    """The Sun over given latitudes; only these matter to the sums."""
    s = np.asarray(sin_latitude, float)
    any_sun = sun_on_body(places_in_true_anomaly(1.5e11, 0.0, len(s)), 0.0, 0.0)
    return replace(any_sun, sin_latitude=s, cos_latitude=np.sqrt(1 - s * s))


def sums_of(shape, sin_latitude, columns=16, lit_samples=1, shadows=True):
    sun = sun_at(sin_latitude)
    table = horizons_of(shape, columns, lit_samples, cache=False) if shadows else no_shadows(shape, columns)
    return light_sums(shape, table, sun, np.full(len(sun.sin_latitude), 1 / len(sun.sin_latitude)))


# One facet under an open sky


@settings(max_examples=60, deadline=None)
@given(st.floats(-np.pi / 2, np.pi / 2), st.floats(-np.pi / 2, np.pi / 2))
def test_the_means_of_a_day_agree_with_quadrature(latitude, tilt):
    a, b = np.sin(latitude) * np.sin(tilt), np.cos(latitude) * np.cos(tilt)
    kink = [float(np.arccos(-a / b))] if b > abs(a) else None
    mean = quad(lambda h: max(0.0, a + b * np.cos(h)), 0, np.pi, points=kink, epsabs=1e-12)[0] / np.pi
    first = quad(lambda h: max(0.0, a + b * np.cos(h)) * np.cos(h), 0, np.pi, points=kink, epsabs=1e-12)[0] / np.pi
    assert_allclose(_day(a, b), [mean, first], rtol=0, atol=1e-10)


def test_the_means_of_a_day_are_the_textbooks_in_the_corners():
    assert_allclose(_day(0.0, 1.0), [1 / np.pi, 0.25], rtol=1e-15)  # equator at equinox: half a cosine
    assert_allclose(_day(0.6, 0.0), [0.6, 0.0], rtol=1e-15)  # pole in summer
    assert _day(-0.6, 0.0) == (0.0, 0.0)  # and in winter
    assert_allclose(_day(0.5, 0.5), [0.5, 0.25], rtol=1e-15)  # the Sun just does not set
    assert _day(-0.5, 0.5) == (0.0, 0.0)


@settings(max_examples=200, deadline=None)
@given(st.lists(st.floats(-1, 1), min_size=1, max_size=60), st.lists(st.floats(-2, 2, width=32), min_size=1))
def test_the_rank_of_a_latitude_agrees_with_counting(latitudes, ends):
    sun = sun_at(latitudes)
    by_latitude, ranked, cells = sun.ranks
    assert (sun.sin_latitude[by_latitude] == ranked).all()
    for x in ends:
        # a latitude within round-off of a cell's edge may count as below it
        below = sum(y < x for y in latitudes)
        near = sum(abs(y - x) < 1e-15 for y in latitudes)
        assert below <= _rank(ranked, cells, x) <= below + near


# Sums over the surface


@pytest.mark.parametrize("lit_samples", [1, 4])
@pytest.mark.parametrize("body", ["jagged", "doughnut"])
def test_light_sums_agree_with_their_twin(body, lit_samples):
    shape = naive.jagged(80, rough=0.5, seed=3) if body == "jagged" else naive.doughnut(12, 6).moved([0.3, -0.2, 0.1])
    latitudes = [0.4, -0.83, 0.0, 1.0, 0.05]
    table = horizons_of(shape, 12, lit_samples, cache=False)
    sun = sun_at(latitudes)
    weight = np.array([0.1, 0.3, 0.2, 0.15, 0.25])
    fine = light_sums(shape, table, sun, weight).fine
    mean = np.zeros(len(shape.facets))
    area = shape.areas_m2.sum()
    size = np.abs(shape.vertices_m).max()
    for p, s in enumerate(latitudes):
        *wanted, mu = naive.light_sums_at(shape, table, s, np.sqrt(1 - s * s))
        mean += weight[p] * mu
        for name, value, scale in zip(SUMS, wanted, (area, area * size, area, area * size)):
            assert_allclose(getattr(fine, name)[p], value, rtol=0, atol=1e-8 * scale)
    assert_allclose(fine.mean_cosine, mean, rtol=0, atol=1e-7)


@pytest.mark.parametrize("lit_samples", [1, 4, 16])
def test_the_coarser_sums_are_those_of_coarser_tables(lit_samples):
    shape = naive.jagged(180, rough=0.5, seed=8)
    sun = sun_at(np.linspace(-0.9, 0.95, 9))
    weight = np.full(9, 1 / 9)
    table = horizons_of(shape, 32, lit_samples, cache=False)
    sums = light_sums(shape, table, sun, weight)
    thin = light_sums(shape, table.thinned(), sun, weight).fine
    few = light_sums(shape, table.sampled_coarser(), sun, weight).fine if lit_samples > 1 else sums.fine
    for name in SUMS:
        scale = np.abs(getattr(sums.fine, name)).max()
        assert_allclose(getattr(sums.fewer_meridians, name), getattr(thin, name), rtol=0, atol=1e-12 * scale)
        assert_allclose(getattr(sums.fewer_samples, name), getattr(few, name), rtol=0, atol=1e-12 * scale)
        assert np.abs(getattr(thin, name) - getattr(sums.fine, name)).max() > 1e-5 * scale  # they do differ
    assert sums.fewer_meridians.mean_cosine is sums.fine.mean_cosine


def test_every_second_place_is_the_sums_at_those_places():
    shape = naive.jagged(80, seed=8)
    latitudes = np.linspace(-0.9, 0.95, 10)
    every, half = sums_of(shape, latitudes).fine.every_second_place(), sums_of(shape, latitudes[::2]).fine
    for name in SUMS:
        assert_allclose(getattr(every, name), getattr(half, name), rtol=1e-12, atol=1e-6)


def test_threads_do_not_change_a_bit_of_the_sums(monkeypatch):
    shape = naive.jagged(500, rough=0.5, seed=8)
    found = []
    for threads in ("1", "3"):
        monkeypatch.setenv("SMALLBODY_THREADS", threads)
        assert thread_count() == int(threads)
        found.append(sums_of(shape, [0.1, -0.5]).fine)
    for name in (*SUMS, "mean_cosine"):
        assert np.array_equal(getattr(found[0], name), getattr(found[1], name))


# Symmetry


@pytest.mark.parametrize("steps", [1, 7])
def test_turning_by_whole_meridians_changes_no_sum(steps):
    shape = naive.jagged(180, rough=0.5, seed=4)
    latitudes = np.linspace(-0.95, 0.9, 8)
    one = sums_of(shape, latitudes, 32, 4).fine
    two = sums_of(naive.turned_about_z(shape, 2 * np.pi * steps / 32), latitudes, 32, 4).fine
    for name in (*SUMS, "mean_cosine"):
        scale = np.abs(getattr(one, name)).max()
        assert_allclose(getattr(two, name), getattr(one, name), rtol=0, atol=1e-11 * scale)


def test_turning_by_a_part_of_a_meridian_changes_sums_within_the_error_of_coarser_tables():
    shape = naive.jagged(180, rough=0.5, seed=4)
    latitudes = np.linspace(-0.95, 0.9, 8)
    one = sums_of(shape, latitudes, 64, 4)
    two = sums_of(naive.turned_about_z(shape, 0.37 * 2 * np.pi / 64), latitudes, 64, 4)
    for name in SUMS:
        moved = np.abs(getattr(one.fine, name) - getattr(two.fine, name))
        coarser = np.abs(getattr(one.fine, name) - getattr(one.fewer_meridians, name))
        assert np.sqrt((moved**2).mean()) < 2 * np.sqrt((coarser**2).mean())


def test_renumbering_facets_changes_no_sum():
    shape = naive.jagged(180, rough=0.5, seed=4)
    rng = np.random.default_rng(3)
    order = rng.permutation(180)
    latitudes = np.linspace(-0.95, 0.9, 8)
    one = sums_of(shape, latitudes, 32, 4).fine
    two = sums_of(Shape(shape.vertices_m, shape.facets[order]), latitudes, 32, 4).fine
    for name in SUMS:
        scale = np.abs(getattr(one, name)).max()
        assert_allclose(getattr(two, name), getattr(one, name), rtol=0, atol=1e-13 * scale)
    assert_allclose(two.mean_cosine, one.mean_cosine[order], rtol=0, atol=1e-15)


def test_light_grows_with_the_square_and_levers_with_the_cube_of_size():
    shape = naive.jagged(180, rough=0.5, seed=4)
    one, two = sums_of(shape, [0.3, -0.6]).fine, sums_of(shape.scaled(8.0), [0.3, -0.6]).fine
    for name, power in zip(SUMS, (2, 3, 2, 3)):
        assert_allclose(getattr(two, name), 8.0**power * getattr(one, name), rtol=1e-13)
    assert_allclose(two.mean_cosine, one.mean_cosine, rtol=1e-13)


def test_a_mirrored_body_has_mirrored_sums():
    shape = naive.jagged(180, rough=0.5, seed=4)
    one, two = (sums_of(x, [0.3, -0.6], 32).fine for x in (shape, shape.mirrored()))
    scale = shape.areas_m2.sum()
    polar, axial = np.array([1, -1, 1]), np.array([-1, 1, -1])  # mirrored across the Sun's meridian
    assert_allclose(two.across, one.across, rtol=1e-12)
    assert_allclose(two.lambert, one.lambert * polar, rtol=0, atol=1e-12 * scale)
    assert_allclose(two.lit_lever, one.lit_lever * polar, rtol=0, atol=1e-12 * scale * 1000)
    assert_allclose(two.lever, one.lever * axial, rtol=0, atol=1e-12 * scale * 1000)


# Closed forms


def test_the_lit_cross_section_of_a_sphere_tends_to_pi_r_squared():
    off = []
    for facets in (320, 1280, 5120):
        shape = make_shape("sphere", facets)
        r = np.linalg.norm(shape.vertices_m, axis=1).max()
        across = sums_of(shape, [0.0, 0.5, 0.99], shadows=False).fine.across
        off.append(1 - across / (np.pi * r * r))
    assert (np.array(off) > 0).all()  # the facets lie inside
    assert max(off[2]) < 0.003
    for coarse, fine in pairwise(off):
        assert_allclose(coarse / fine, 4.0, rtol=0.06)  # with the area of the facets


@pytest.mark.parametrize("points", [8, 300])
def test_the_mean_cross_section_of_a_convex_body_is_a_quarter_of_its_surface(points):
    # A. Cauchy 1832, over all directions; Gauss's nodes integrate over sin(latitude)
    shape = naive.convex(points)
    nodes, weights = np.polynomial.legendre.leggauss(60)
    across = sums_of(shape, nodes).fine.across
    assert_allclose(weights @ across / 2, shape.areas_m2.sum() / 4, rtol=2e-5)


def test_opposite_directions_see_the_same_cross_section_of_a_convex_body():
    across = sums_of(naive.convex(), [0.3, -0.3, 0.8, -0.8, 0.0, 0.0, 1.0, -1.0]).fine.across
    assert_allclose(across[::2], across[1::2], rtol=1e-13)


def silhouette(shape, sin_latitude, longitudes, grid):
    """Mean area of the shadow that the body throws, by a grid of parallel rays of a general mesh library."""
    pytest.importorskip("embreex")
    trimesh = pytest.importorskip("trimesh")
    from trimesh.ray.ray_pyembree import RayMeshIntersector

    engine = RayMeshIntersector(trimesh.Trimesh(shape.vertices_m, shape.facets, process=False))
    reach = np.linalg.norm(shape.vertices_m, axis=1).max() * 1.01
    step = (np.arange(grid) + 0.5) / grid * 2 - 1
    y, z = (reach * g.ravel() for g in np.meshgrid(step, step))
    areas = []
    for lon in longitudes:
        c = np.sqrt(1 - sin_latitude**2)
        u = np.array([c * np.cos(lon), c * np.sin(lon), sin_latitude])
        e1 = np.array([-np.sin(lon), np.cos(lon), 0.0])
        start = 2 * reach * u + y[:, None] * e1 + z[:, None] * np.cross(u, e1)
        hit = engine.intersects_any(start, np.broadcast_to(-u, start.shape))
        areas.append(hit.mean() * (2 * reach) ** 2)
    return float(np.mean(areas))


@pytest.mark.parametrize("kind", ["twolobe", "cratered"])
def test_the_lit_cross_section_of_a_concave_body_is_its_silhouette(kind):
    # every ray of the Sun that meets the body lights exactly one point: shadows take away what is counted twice
    shape = make_shape(kind, 1280, seed=3)
    longitudes = 2 * np.pi * (np.arange(48) + 0.5) / 48
    for latitude in (0.0, 0.5):
        area = silhouette(shape, latitude, longitudes, 100)
        lit = sums_of(shape, [latitude], 64, 4).fine.across[0]
        open_sky = sums_of(shape, [latitude], shadows=False).fine.across[0]
        assert abs(lit / area - 1) < 0.002
        assert open_sky / area > 1.01


# What must vanish


def spin_torques(shape, lit_samples, columns=64):
    """Mean spin torque of the light that arrives and of the light given back, in units of S R^3/c."""
    places = places_in_true_anomaly(1.5e11, 0.0, 48)
    sun = sun_on_body(places, 0.7, 0.3)
    sums = light_sums(shape, horizons_of(shape, columns, lit_samples, cache=False), sun, places.weight).fine
    u = np.stack([sun.cos_latitude, 0 * sun.cos_latitude, sun.sin_latitude], axis=1)
    radius = shape.diameter_m / 2
    direct = places.weight @ np.cross(sums.lit_lever, u)[:, 2]
    return direct / radius**3, 2 / 3 * (places.weight @ sums.lever[:, 2]) / radius**3


def test_light_that_arrives_gives_a_convex_body_no_mean_spin_torque():
    # D. Nesvorny & D. Vokrouhlicky 2008, A&A 480, 1 (from memory); exact, as nothing is shaded
    shape = naive.convex().moved([70.0, -40.0, 20.0])  # about a point off the middle
    direct, _ = spin_torques(shape, 1)
    assert abs(direct) < 1e-14


def test_light_that_arrives_gives_a_concave_body_a_spin_torque_that_vanishes_with_samples_and_facets():
    # D. Nesvorny & D. Vokrouhlicky 2008, A&A 480, 1 (from memory): what is left is the error of the shadows
    kinds, seeds = ("gaussian", "twolobe", "cratered"), range(3)
    left, back = {}, {}
    for facets in (320, 1280):
        bodies = [make_shape(kind, facets, seed=seed) for kind in kinds for seed in seeds]
        for lit_samples in (1, 4, 16):
            both = np.array([spin_torques(body, lit_samples) for body in bodies])
            left[facets, lit_samples], back[facets, lit_samples] = np.sqrt((both**2).mean(axis=0))
    for facets in (320, 1280):
        assert left[facets, 4] < 0.7 * left[facets, 1]
        assert left[facets, 16] < 0.35 * left[facets, 1]
    assert left[1280, 1] < 0.9 * left[320, 1]
    assert left[1280, 4] < 0.7 * left[320, 4]
    # the torque of light given back by Lambert's law is real: some thousandths of S R^3/c
    assert left[1280, 16] < 0.01 * back[1280, 16]
    assert 5e-4 < back[1280, 16] < 1e-2


# Facet by facet, node by node


@pytest.mark.parametrize("lit_samples", [1, 4])
def test_lit_cosines_agree_with_their_twin(lit_samples):
    shape = naive.jagged(80, rough=0.5, seed=2)
    columns, latitudes = 12, [0.7, -0.2, 0.0, -1.0]
    table = horizons_of(shape, columns, lit_samples, cache=False)
    for given_table in (table, table.sampled_coarser()) if lit_samples > 1 else (table,):
        facets = np.array([7, 1, 64, *np.flatnonzero(~given_table.overshadowed)[:2], *given_table.shadowed_facets[:12]])
        sun = sun_at(latitudes)
        found = lit_cosines(shape, given_table, sun, facets)
        assert found.shape == (4, columns, len(facets))
        for p, s in enumerate(latitudes):
            for j in range(columns):
                c = (-j) % columns  # the Sun's longitude falls as time goes on
                for l, f in enumerate(facets):
                    if given_table.overshadowed[f]:
                        lon = np.array([naive.longitude_of(given_table, k, c) for k in range(len(given_table.shifts))])
                        free = [naive.free_at(given_table, f, k, c, s) for k in range(len(lon))]
                    else:
                        lon, free = np.array([2 * np.pi * c / columns]), [True]
                    mu = naive.open_sky(shape.normals[f], s, np.sqrt(1 - s * s), lon)
                    assert abs(found[p, j, l] - (mu * free).mean()) < 1e-7


def test_lit_cosines_add_up_to_the_sums_of_light_as_nodes_are_added():
    shape = naive.jagged(180, rough=0.5, seed=2)
    sun = sun_at([0.6, -0.3])
    off = []
    for columns in (32, 128):
        table = horizons_of(shape, columns, 4, cache=False)
        mean = lit_cosines(shape, table, sun, np.arange(180)).mean(axis=1)
        off.append(np.abs(mean @ shape.areas_m2 / light_sums(shape, table, sun, np.ones(2) / 2).fine.across - 1).max())
    assert off[0] < 1e-3
    assert off[1] < off[0] / 8  # second order


def test_lit_latitudes_are_the_cosines_of_facets_at_longitude_zero():
    latitude = np.array([-1.5, -0.4, 0.0, 0.9, np.pi / 2])
    sun = sun_at([0.7, -0.2, 1.0])
    found = lit_latitudes(sun, latitude, 24)
    normals = np.stack([np.cos(latitude), 0 * latitude, np.sin(latitude)], axis=1)
    lon = -2 * np.pi * np.arange(24) / 24
    for p in range(3):
        for l, n in enumerate(normals):
            wanted = naive.open_sky(n, sun.sin_latitude[p], sun.cos_latitude[p], lon)
            assert_allclose(found[p, :, l], wanted, rtol=0, atol=1e-15)


def test_facets_under_an_open_sky_have_the_history_of_their_latitude_later_by_their_longitude():
    shape = make_shape("sphere", 320)
    columns = 32
    sun = sun_at([0.4])
    some = np.arange(0, 320, 9)
    found = lit_cosines(shape, no_shadows(shape, columns), sun, some)
    latitude = np.arcsin(shape.normals[some, 2])
    longitude = np.arctan2(shape.normals[some, 1], shape.normals[some, 0])
    time = 2 * np.pi * np.arange(columns) / columns
    wanted = np.maximum(
        0.0, 0.4 * np.sin(latitude) + np.sqrt(1 - 0.16) * np.cos(latitude) * np.cos(time[:, None] + longitude)
    )
    assert_allclose(found[0], wanted, rtol=0, atol=1e-14)
