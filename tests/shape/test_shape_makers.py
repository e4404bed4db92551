"""Made bodies: closed, even, seeded, the same at any number of facets, and with the features they are named for."""

from __future__ import annotations

import math

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_shape import twin_harmonics_sum, twin_spread
from numpy.testing import assert_allclose

from smallbody.errors import ShapeError
from smallbody.shape import KINDS, Shape, check_shape, describe, make_shape
from smallbody.shape.check import Edges
from smallbody.shape.even import even_surface
from smallbody.shape.grid import grid_on, nearest_facet_count, sphere_facet_counts, sphere_grid
from smallbody.shape.make import gaussian_log_radius, harmonics_sum


def quality(shape: Shape) -> np.ndarray:
    """4 sqrt(3) area over the sum of squared sides: 1 for equilateral facets."""
    p = shape.vertices_m[shape.facets]
    return 4.0 * math.sqrt(3.0) * shape.areas_m2 / ((p - np.roll(p, -1, axis=1)) ** 2).sum(axis=(1, 2))


def spin_up(shape: Shape) -> float:
    """Torque about z of the heat of a dark convex body without obliquity, as part of the sum of its facets' sizes.

    Light absorbed over a rotation goes with the sine of the angle from axis to normal; recoil is against the normal.
    """
    absorbed = np.hypot(shape.normals[:, 0], shape.normals[:, 1]) * shape.areas_m2
    torque = -absorbed * np.cross(shape.centroids_m, shape.normals)[:, 2]
    return float(torque.sum() / np.abs(absorbed).sum() / shape.diameter_m)


@pytest.mark.parametrize("kind", KINDS)
def test_every_kind_is_closed_even_and_of_its_size_from_the_fewest_facets_to_fifty_thousand(kind):
    for facets in (KINDS[kind].fewest, 100, 333, 1000, 5000, 50_000):
        if facets < KINDS[kind].fewest:
            continue
        shape = make_shape(kind, facets)
        assert check_shape(shape) == []
        assert len(shape.facets) == nearest_facet_count(facets)
        assert abs(math.log(len(shape.facets) / facets)) < (math.log(1.5) if facets >= 20 else 1.0)
        assert shape.diameter_m == pytest.approx(1000.0, rel=1e-12)
        assert_allclose(shape.mass.centre_m, 0.0, atol=1e-9)
        assert quality(shape).min() > 0.4
        assert np.median(quality(shape)) > 0.9
        assert describe(shape)["smallest_angle_deg"] > 15.0
        # nine times finer at the neck of two lobes, by wish
        assert shape.areas_m2.max() < (25.0 if kind == "twolobe" else 10.0) * shape.areas_m2.min()
        left, right = Edges(shape.facets).pair_facets.T
        assert (shape.normals[left] * shape.normals[right]).sum(
            axis=1
        ).min() > -0.75  # no facet is folded back on the next


@settings(max_examples=40, deadline=None)
@given(kind=st.sampled_from(sorted(KINDS)), seed=st.integers(0, 10**6), data=st.data())
def test_every_kind_is_closed_whatever_its_numbers(kind, seed, data):
    numbers = {}
    for name, number in KINDS[kind].numbers.items():
        if number.whole:
            value = st.integers(int(number.low), int(number.high)).filter(lambda n, b=number.barred: n not in b)
        else:
            value = st.floats(number.low, number.high)
        numbers[name] = data.draw(value, label=name)
    if kind == "ellipsoid":
        numbers["axes"] = data.draw(st.tuples(*[st.floats(1.0, 20.0)] * 3))
    shape = make_shape(kind, data.draw(st.sampled_from([80, 320, 980])), seed, diameter_km=0.3, **numbers)
    assert check_shape(shape) == []
    assert shape.diameter_m == pytest.approx(300.0)
    # star-shaped about the middle it was made around, and every facet outward from it: so it cannot cut through itself
    assert trimesh.Trimesh(shape.vertices_m, shape.facets, process=False).is_watertight


@pytest.mark.parametrize("kind", KINDS)
def test_the_same_seed_gives_the_same_bytes_and_another_seed_another_body(kind):
    once, again, other = make_shape(kind, 500, 3), make_shape(kind, 500, 3), make_shape(kind, 500, 4)
    assert once.sha256 == again.sha256
    chance = kind in ("gaussian", "top", "twolobe", "cratered")
    assert (once.sha256 != other.sha256) is chance


@pytest.mark.parametrize("kind", KINDS)
def test_more_facets_give_the_same_body_more_finely(kind):
    coarse, middling, fine = (make_shape(kind, facets, 1) for facets in (1280, 5120, 11_520))
    assert_allclose(coarse.mass.inertia_m5, fine.mass.inertia_m5, atol=0.015 * fine.mass.moments_m5[2])
    assert_allclose(middling.mass.inertia_m5, fine.mass.inertia_m5, atol=0.004 * fine.mass.moments_m5[2])
    mesh = trimesh.Trimesh(fine.vertices_m, fine.facets, process=False)
    _, away, _ = trimesh.proximity.closest_point(mesh, coarse.vertices_m[::20])
    assert away.max() < 15.0  # m, of a diameter of 1000; coarse facets are 70 m wide


@pytest.mark.parametrize("kind", ["gaussian", "twolobe", "cratered"])
def test_bodies_without_an_axis_of_their_own_spin_about_their_greatest_moment(kind):
    for seed in range(3):
        assert describe(make_shape(kind, 5000, seed))["spin_tilt_deg"] < 1.0


def test_the_sphere_grid_is_even_and_symmetric():
    for facets in (20, 60, 180, 500, 2160, 5120):
        grid = sphere_grid(facets)
        assert len(grid.facets) == facets
        ball = Shape(grid.points, grid.facets)
        assert check_shape(ball) == []
        assert ball.areas_m2.max() / ball.areas_m2.min() < 1.25
        assert quality(ball).min() > 0.96
        assert_allclose(np.linalg.norm(grid.points, axis=1), 1.0, rtol=1e-14)
        for image in (-grid.points, grid.points * [1.0, -1.0, 1.0]):  # a point for a point in the mirror
            assert np.sort(np.round(image, 9), axis=0).tolist() == np.sort(np.round(grid.points, 9), axis=0).tolist()
        assert abs(spin_up(ball)) < 1e-15


def test_the_nearest_facet_count_is_the_nearest():
    counts = sphere_facet_counts(10_000)
    assert counts[:8].tolist() == [20, 60, 80, 180, 240, 320, 500, 540]
    for facets in (8, 20, 39, 41, 100, 410, 5000, 9999):
        nearest = nearest_facet_count(facets)
        assert nearest in counts
        assert abs(math.log(nearest / facets)) == min(abs(np.log(counts / facets)))


@pytest.mark.parametrize(("base", "coarse", "fine"), [(20, 5, 11), (20, 4, 8), (60, 3, 7), (20, 1, 6), (60, 5, 5)])
def test_values_carried_to_a_finer_grid_are_linear_in_each_facet(base, coarse, fine):
    rough, smooth = grid_on(base, coarse), grid_on(base, fine)
    carried = rough.carry(rough.points, smooth)
    # a linear function of place is carried exactly onto the flat facets: so each point lies in the plane of one of them
    mesh = trimesh.Trimesh(rough.points, rough.facets, process=False)
    _, away, _ = trimesh.proximity.closest_point(mesh, carried)
    assert np.abs(away).max() < 1e-9
    if fine % coarse == 0:
        assert len(np.unique(np.round(carried, 9), axis=0)) == len(smooth.points)


def test_harmonics_agree_with_their_definition():
    rng = np.random.default_rng(5)
    coefficients = rng.standard_normal((9, 9, 2))
    u = rng.standard_normal((50, 3))
    u /= np.linalg.norm(u, axis=1)[:, None]
    u = np.vstack([u, np.eye(3), -np.eye(3)])
    assert_allclose(harmonics_sum(coefficients, u), twin_harmonics_sum(coefficients, u), atol=1e-11)


def test_a_gaussian_sphere_has_the_statistics_it_is_asked_for():
    # Muinonen 1998, A&A 332, 1087: log-radii have variance ln(1 + sigma^2) and covariance sum of C_l P_l(cos angle)
    sigma, index, degree, draws = 0.25, 3.0, 8, 4000
    l = np.arange(2, degree + 1)
    c = l**-index * math.log(1 + sigma**2) / (l**-index).sum()
    angles = np.radians([0.0, 20.0, 60.0, 90.0, 180.0])
    u = np.stack([np.sin(angles), np.zeros(5), np.cos(angles)], axis=1)
    turn = np.linalg.qr(np.random.default_rng(0).standard_normal((3, 3)))[0]
    s = np.array(
        [gaussian_log_radius(np.random.default_rng(k), sigma, index, degree)(u @ turn.T) for k in range(draws)]
    )
    expected = np.array(
        [(c * [np.polynomial.legendre.Legendre.basis(k)(math.cos(a)) for k in l]).sum() for a in angles]
    )
    found = (s * s[:, :1]).mean(axis=0)
    spread = math.log(1 + sigma**2) * math.sqrt(2.0 / draws)  # standard error of a variance
    assert_allclose(found, expected, atol=4.0 * spread)
    assert abs(s.mean()) < 4.0 * math.sqrt(expected[0] / draws / 5.0) * 3.0
    # the lognormal law: relative standard deviation of the radius itself
    r = np.exp(s[:, 0])
    assert r.std() / r.mean() == pytest.approx(sigma, rel=0.06)


def test_an_ellipsoids_facets_lie_on_the_ellipsoid_but_for_the_volume_they_are_scaled_to():
    axes = np.array([0.34, 0.25, 0.19])
    shape = make_shape("ellipsoid", 2000, axes=tuple(axes))
    level = np.sqrt(((shape.vertices_m / 1000.0 / axes) ** 2).sum(axis=1))
    assert_allclose(level, level.mean(), rtol=1e-9)
    assert 1.0 < level.mean() < 1.003
    assert abs(spin_up(shape)) < 1e-12
    assert make_shape("ellipsoid", 500, axes=tuple(axes), diameter_km=2.0).diameter_m == pytest.approx(2000.0)


def test_a_top_has_its_ridge_at_the_equator_and_steeper_flanks_for_a_sharper_one():
    def flank_deg(ridge: float) -> float:
        shape = make_shape("top", 5000, ridge=ridge, roughness=0.0)
        latitude = np.degrees(np.arcsin(shape.centroids_m[:, 2] / np.linalg.norm(shape.centroids_m, axis=1)))
        tilt = np.degrees(np.arccos(np.abs(shape.normals[:, 2])))
        return 90.0 - float(np.median(tilt[(np.abs(latitude) > 4.0) & (np.abs(latitude) < 10.0)]))

    assert flank_deg(0.0) < 12.0  # an ellipsoid's
    assert flank_deg(0.4) > flank_deg(0.0) + 5.0
    assert flank_deg(0.8) > flank_deg(0.4) + 5.0
    extents = make_shape("top", 5000, roughness=0.0).extents_m
    assert extents[2] / extents[0] == pytest.approx(0.9, abs=0.01)


def overshadowed(shape: Shape) -> np.ndarray:
    """Whether a facet sees another facet of the body: some of 60 rays above its horizon come back."""
    rng = np.random.default_rng(0)
    mesh = trimesh.Trimesh(shape.vertices_m, shape.facets, process=False)
    hit = np.zeros(len(shape.facets), dtype=bool)
    for _ in range(60):
        rays = rng.standard_normal((len(shape.facets), 3))
        up = (rays * shape.normals).sum(axis=1)
        rays = rays * np.sign(up)[:, None]
        hit |= mesh.ray.intersects_any(shape.centroids_m + 1e-4 * shape.diameter_m * shape.normals, rays)
    return hit


def test_two_lobes_have_a_neck_in_which_facets_see_each_other_and_no_other_hollow():
    shape = make_shape("twolobe", 1280, roughness=0.0)
    seen = overshadowed(shape)
    x = shape.centroids_m[:, 0]
    radius = np.hypot(shape.centroids_m[:, 1], shape.centroids_m[:, 2])
    lobes = [radius[x > 0.3 * x.max()].max(), radius[x < 0.3 * x.min()].max()]
    middle = np.abs(x) < 0.4 * min(-x.min(), x.max())
    assert radius[middle].min() < 0.6 * min(lobes)  # 0.45 in the x-y plane
    assert 0.1 < shape.areas_m2[seen].sum() / shape.areas_m2.sum() < 0.9
    assert abs(shape.extents_m[0] / shape.extents_m[2] - 1.9) < 0.3
    hull = trimesh.Trimesh(shape.vertices_m, shape.facets, process=False).convex_hull
    assert shape.mass.volume_m3 < 0.9 * hull.volume


def test_a_cratered_body_has_bowls_that_overshadow_themselves():
    deep = make_shape("cratered", 5000, craters=12, roughness=0.0)
    none = make_shape("cratered", 5000, craters=0, roughness=0.0)
    assert overshadowed(none).sum() == 0
    assert 0.05 < deep.areas_m2[overshadowed(deep)].sum() / deep.areas_m2.sum() < 0.9
    radii = np.linalg.norm(deep.vertices_m, axis=1)
    assert radii.min() < 0.9 * np.median(radii)  # floors
    # the largest: depth 0.18 of a diameter of 50 degrees, 0.157 of the radius, and a fifth of that for the rim
    one = make_shape("cratered", 20_000, craters=1, roughness=0.0)
    radii = np.linalg.norm(one.vertices_m, axis=1)
    assert (radii.max() - radii.min()) / np.median(radii) == pytest.approx(1.2 * 0.18 * math.radians(50.0), rel=0.15)


@pytest.mark.parametrize(("facets", "blades"), [(320, 4), (1280, 2), (1280, 4), (1280, 7), (5120, 4), (5120, 7)])
def test_a_windmill_of_hand_1_is_spun_up_and_its_mirror_image_down(facets, blades):
    up = make_shape("windmill", facets, blades=blades, hand=1)
    down = make_shape("windmill", facets, blades=blades, hand=-1)
    assert spin_up(up) > 1e-3
    assert spin_up(down) < -1e-3
    assert spin_up(up.mirrored()) == pytest.approx(-spin_up(up), rel=1e-12)
    assert spin_up(down) == pytest.approx(-spin_up(up), rel=0.15)


def test_a_windmills_steep_faces_look_west_and_its_gentle_slopes_lean_to_the_poles():
    shape = make_shape("windmill", 5120, hand=1)
    east = np.cross([0.0, 0.0, 1.0], shape.centroids_m)
    east /= np.linalg.norm(east, axis=1)[:, None]
    toward_east = (shape.normals * east).sum(axis=1)
    steep = np.abs(toward_east) > 0.5
    assert (toward_east[steep] < 0.0).mean() > 0.97
    assert 0.1 < shape.areas_m2[steep].sum() / shape.areas_m2.sum() < 0.5
    height = np.abs(shape.centroids_m[:, 2]) / np.linalg.norm(shape.centroids_m, axis=1)
    middle = (height > 0.5) & (height < 0.8)
    upright = np.hypot(shape.normals[:, 0], shape.normals[:, 1])
    assert np.median(upright[middle & steep]) > np.median(upright[middle & ~steep]) + 0.05


@pytest.mark.parametrize(("facets", "blades"), [(1280, 3), (1280, 4), (5120, 4)])
def test_a_windmills_facets_do_not_lie_across_its_edges(facets, blades):
    shape = make_shape("windmill", facets, blades=blades, steep=0.15)
    longitude = np.arctan2(shape.vertices_m[:, 1], shape.vertices_m[:, 0])
    low = np.hypot(shape.vertices_m[:, 0], shape.vertices_m[:, 1]) > 0.4 * shape.diameter_m / 2.0
    across = along = 0
    for edge in -2.0 * np.pi / blades * np.concatenate([np.arange(blades), np.arange(blades) + 0.85]):
        away = np.angle(np.exp(1j * (longitude - edge)))[shape.facets]
        here = (np.abs(away).max(axis=1) < 1.0) & low[shape.facets].all(axis=1)
        aside = (
            0.004  # radians: the centre of mass is moved to the axis, so the edges stand a little off their meridians
        )
        across += int((here & (away.min(axis=1) < -aside) & (away.max(axis=1) > aside)).sum())
        along += int((here & (np.abs(away) < aside).any(axis=1)).sum())
    assert along > 200
    assert across < 0.01 * along


@pytest.mark.parametrize("seed", range(3))
def test_spreading_vertices_agrees_with_its_twin(seed):
    from smallbody.shape._relax import spread

    rng = np.random.default_rng(seed)
    grid = sphere_grid(80)
    p = grid.points * rng.uniform(0.7, 1.3, (len(grid.points), 1))
    p.flags.writeable = False
    facets = grid.facets.copy()
    facets.flags.writeable = False
    out = np.full_like(p, np.nan)
    density = rng.uniform(1.0, 9.0, len(p))
    density.flags.writeable = False
    spread(p, facets, density, 0.8, np.full_like(p, np.nan), np.full(len(p), np.nan), out)
    assert_allclose(out, twin_spread(p, facets, density, 0.8), atol=1e-12)


def test_swapping_edges_keeps_the_surface_closed_and_betters_the_worst_facet():
    from smallbody.shape._relax import neighbours, swap_edges

    grid = sphere_grid(980)
    u = grid.points * [5.0, 1.0, 1.0]
    before = Shape(u, grid.facets)
    f, across = grid.facets.copy(), np.empty_like(grid.facets)
    key = (f * len(u) + f[:, [1, 2, 0]]).ravel()
    order = np.argsort(key)
    neighbours(f, (key[order], order // 3, len(u)), across)
    degree = np.bincount(f.ravel())
    total = 0
    for _ in range(20):
        swapped = swap_edges(u, f, across, degree, np.zeros(len(u), dtype=np.int64), False)
        total += swapped
        if not swapped:
            break
    after = Shape(u, f)
    assert check_shape(before) == []
    assert total > 50
    assert check_shape(after) == []
    assert quality(after).min() >= quality(before).min()
    assert quality(after).mean() > quality(before).mean() + 0.05
    assert np.bincount(f.ravel()).tolist() == degree.tolist()
    expected = {(a, b): k for k, t in enumerate(f.tolist()) for a, b in zip(t, [*t[1:], t[0]])}
    for k, t in enumerate(f.tolist()):  # who lies across which edge is still right
        assert [expected[b, a] for a, b in zip(t, [*t[1:], t[0]])] == across[k].tolist()


def test_a_body_so_ragged_that_facets_would_turn_over_still_closes():
    def ragged(u: np.ndarray) -> np.ndarray:
        return 1.0 + 0.8 * np.sin(9.0 * u[:, 0]) * np.sin(11.0 * u[:, 1]) * np.cos(8.0 * u[:, 2])

    vertices, facets = even_surface(ragged, 1280)
    a, b, c = (vertices[facets[:, k]] for k in range(3))
    assert (np.einsum("ij,ij->i", a, np.cross(b, c)) > 0.0).all()
    assert [f.kind for f in check_shape(Shape(vertices, facets))] in ([], ["degenerate"])


@pytest.mark.parametrize(
    ("call", "said"),
    [
        ({"kind": "spere", "facets": 100}, "no kind of shape is called 'spere' (did you mean 'sphere'?)"),
        ({"kind": "sphere", "facets": 7}, "facets is a whole number from 8"),
        ({"kind": "sphere", "facets": 10**9}, "facets is a whole number"),
        ({"kind": "sphere", "facets": 100.5}, "facets is a whole number"),
        ({"kind": "sphere", "facets": math.nan}, "facets is a whole number"),
        ({"kind": "sphere", "facets": "100"}, "facets is a whole number"),
        ({"kind": "gaussian", "facets": 100, "seed": -1}, "seed is a whole number"),
        ({"kind": "gaussian", "facets": 100, "sigma": 2.0}, "sigma is a number from 0 to 0.4, not 2.0"),
        ({"kind": "gaussian", "facets": 100, "sigma": math.nan}, "sigma is a number from 0 to 0.4, not nan"),
        ({"kind": "gaussian", "facets": 100, "degree": 2.5}, "degree is a whole number from 2 to 30, not 2.5"),
        ({"kind": "top", "facets": 100, "rigde": 0.5}, "a top takes no 'rigde' (did you mean 'ridge'?)"),
        ({"kind": "windmill", "facets": 100, "hand": 0}, "hand is 1 or -1, not 0"),
        ({"kind": "sphere", "facets": 100, "diameter_km": 0.0}, "diameter_km is a number"),
        ({"kind": "sphere", "facets": 100, "diameter_km": math.inf}, "diameter_km is a number"),
        ({"kind": "sphere", "facets": 100, "diameter_km": "1"}, "diameter_km is a number"),
        ({"kind": "ellipsoid", "facets": 100, "axes": (1.0, 2.0)}, "three semi-axes in km"),
        ({"kind": "ellipsoid", "facets": 100, "axes": (1.0, 2.0, -1.0)}, "axes is a number"),
        ({"kind": "ellipsoid", "facets": 100, "axes": (1.0, 2.0, 50.0)}, "at most 20 times its shortest"),
        ({"kind": "ellipsoid", "facets": 100, "axes": 3.0}, "three semi-axes in km"),
        ({"kind": "sphere", "facets": 100, "axes": (1, 1, 1)}, "a sphere takes no 'axes'"),
    ],
)
def test_numbers_a_maker_cannot_use_are_refused(call, said):
    with pytest.raises(ShapeError) as caught:
        make_shape(**call)
    assert said in str(caught.value)
