"""Who sees the Sun: horizons against brute force, against ray casting by other libraries, and by symmetry."""

from dataclasses import replace

import naive_light as naive
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from smallbody.errors import ShapeError, SizeMismatch
from smallbody.light import horizons_of, no_shadows
from smallbody.light._horizons import BEYOND, MOST, TOUCH, _join
from smallbody.light._tree import LEAF, _above_plane, _build
from smallbody.light.horizons import _tabulate
from smallbody.shape import Shape, make_shape
from smallbody.workers import SILENT

GRAZING = 1e-5  # of a facet's height: a ray this near to its edge may fall on either side
FLOAT32 = 2.0**-24  # round-off of sin(latitude) as it is kept


def table_of(shape, columns=32, lit_samples=1):
    return horizons_of(shape, columns, lit_samples, cache=False)


CONCAVE = {
    "jagged": lambda: naive.jagged(180, seed=3),
    "more jagged": lambda: naive.jagged(180, rough=0.6, seed=4),
    "doughnut": lambda: naive.doughnut(),
    "upright doughnut": lambda: naive.doughnut(tilt=np.pi / 2),
    "two lobes": lambda: make_shape("twolobe", 240, seed=2, neck=0.4),
    "cratered": lambda: make_shape("cratered", 320, seed=5),
    "floating": lambda: naive.together(
        naive.jagged(80, seed=1), naive.jagged(80, seed=2).moved([900.0, 2200.0, 1200.0])
    ),
}


@pytest.fixture(params=CONCAVE, scope="module")
def concave(request):
    return CONCAVE[request.param]()


# The tree


def tree_of(shape):
    corners = shape.vertices_m[shape.facets]
    f = len(corners)
    order = np.arange(f)
    boxes = np.full((2, 2 * f + 2, 3), np.nan)
    links = np.full((3, 2 * f + 2), -1)
    nodes = _build(corners.min(1), corners.max(1), shape.centroids_m, order, *boxes, *links)
    return corners, order, boxes, links, nodes


@pytest.mark.parametrize("facets", [1, LEAF, LEAF + 1, 20, 180, 500])
def test_the_tree_holds_every_facet_once_in_boxes_that_contain_it(facets):
    ball = make_shape("sphere", max(20, facets))
    shape = Shape(ball.vertices_m, ball.facets[:facets])
    corners, order, (low, high), (start, end, skip), nodes = tree_of(shape)
    assert sorted(order) == list(range(len(shape.facets)))
    covered = []
    for i in range(nodes):
        inside = corners[order[start[i] : end[i]]]
        assert_allclose(low[i], inside.min((0, 1)), rtol=0, atol=0)
        assert_allclose(high[i], inside.max((0, 1)), rtol=0, atol=0)
        assert i < skip[i] <= nodes
        if end[i] - start[i] <= LEAF:
            assert skip[i] == i + 1
            covered.extend(range(start[i], end[i]))
        else:  # the two children share their parent's facets and end where it ends
            left, right = i + 1, skip[i + 1]
            assert (start[left], end[left], end[right]) == (start[i], start[right], end[i])
            assert skip[right] == skip[i]
    assert covered == list(range(len(shape.facets)))
    assert np.isnan(low[nodes:]).all()


def test_a_tree_of_facets_at_one_place_is_built_all_the_same():
    one = naive.box([0, 0, 0], [1, 1, 1])
    many = naive.together(*[one] * 40)
    _, order, _, _, nodes = tree_of(many)
    assert sorted(order) == list(range(480))
    assert nodes == 127  # 480 halved until at most 8 are left: 64 leaves


def test_facets_above_a_plane_agree_with_asking_every_corner(concave):
    corners, order, boxes, links, nodes = tree_of(concave)
    rng = np.random.default_rng(11)
    found = np.empty(len(corners), np.int64)
    for _ in range(60):
        n = rng.standard_normal(3)
        if rng.random() < 0.2:
            n = np.eye(3)[rng.integers(3)] * rng.choice([-1, 1])
        n /= np.linalg.norm(n)
        d = rng.uniform(-1.2, 1.2) * np.abs(corners @ n).max()
        count = _above_plane(*n, d, *boxes, *links, nodes, order, corners, found)
        wanted = np.flatnonzero((corners @ n > d).any(axis=1))
        assert sorted(found[:count]) == list(wanted)


# Intervals


def joined(intervals):
    low, high = np.full(MOST + 2, np.nan), np.full(MOST + 2, np.nan)
    count = 0
    for lo, hi in intervals:
        count = _join(low, high, count, lo, hi)
    return [[a, b] for a, b in zip(low[:count], high[:count])]


def joined_plainly(intervals):
    kept = []
    for one in intervals:
        kept = naive.union([*kept, list(one)], TOUCH)
        if len(kept) > MOST:
            kept = naive.narrowest_gap_closed(kept)
    return kept


interval = st.tuples(st.floats(-1, 1), st.floats(0, 0.3)).map(lambda x: (x[0], min(1.0, x[0] + x[1])))
splinter = st.tuples(st.integers(-40, 39), st.floats(0.1, 0.9)).map(lambda x: (x[0] / 40, (x[0] + x[1]) / 40))


@settings(max_examples=300, deadline=None)
@given(st.lists(interval, max_size=30))
def test_joined_intervals_agree_with_their_union(intervals):
    assert joined(intervals) == joined_plainly(intervals)


@settings(max_examples=300, deadline=None)
@given(st.lists(splinter, min_size=10, max_size=60))
def test_more_intervals_than_are_kept_lose_their_narrowest_gaps(intervals):
    kept = joined(intervals)
    assert kept == joined_plainly(intervals)
    assert len(kept) <= MOST
    for lo, hi in intervals:  # whatever is blocked stays blocked
        assert any(a <= lo and hi <= b for a, b in kept)


@settings(max_examples=200, deadline=None)
@given(st.lists(interval, max_size=11), st.randoms(use_true_random=False))
def test_the_order_in_which_intervals_come_does_not_matter(intervals, random):
    shuffled = list(intervals)
    random.shuffle(shuffled)
    assert_allclose(np.ravel(joined(shuffled)), np.ravel(joined(intervals)), rtol=0, atol=12 * TOUCH)


# Whole tables against brute force


def test_a_table_agrees_with_cutting_every_facet_by_every_meridian(concave):
    table = table_of(concave, columns=16, lit_samples=4)
    rng = np.random.default_rng(5)
    facets = rng.choice(len(concave.facets), 40, replace=False)
    unlike = 0
    for f in facets:
        for s in range(4):
            c = rng.integers(16)
            kept = naive.tabulated(table, f, s, c)
            wanted = naive.blocked_on_meridian(concave, table.samples[f, s], f, naive.longitude_of(table, s, c))
            # what rises over the facet's own plane by round-off only is no obstacle: splinters at the horizon
            wanted = [w for w in wanted if w[1] - w[0] > 1e-8]
            unlike += len(kept) != len(wanted)
            if len(kept) == len(wanted):
                assert_allclose(np.clip(np.ravel(kept), -1, 1), np.ravel(wanted), rtol=0, atol=2 * FLOAT32)
    assert unlike == 0


def sun_over(shape, horizons, sample, rng):
    """A direction on each meridian of a sample, away from the poles: latitude of any size."""
    lon = naive.longitude_of(horizons, sample, np.arange(horizons.columns))
    lat = np.arcsin(rng.uniform(-0.98, 0.98, horizons.columns))
    return np.stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], -1)


@pytest.mark.parametrize("lit_samples", [1, 4])
def test_on_its_meridians_the_table_agrees_with_ray_casting(concave, lit_samples):
    table = table_of(concave, columns=32, lit_samples=lit_samples)
    rng = np.random.default_rng(8)
    own = np.arange(len(concave.facets))
    sample = lit_samples - 1
    one = naive.only_sample(table, sample)
    directions = np.concatenate([sun_over(concave, table, sample, rng) for _ in range(2)])
    sees = one.sees(directions)
    points = table.samples[:, sample]
    surely = naive.rays_blocked(concave, points, own, directions, -GRAZING)
    perhaps = naive.rays_blocked(concave, points, own, directions, GRAZING)
    turned = concave.normals @ directions.T > 1e-6  # otherwise its own plane hides the Sun
    clear = turned & (surely == perhaps)
    assert set(np.unique(sees)) <= {0.0, 1.0}
    assert (sees == (~surely).astype(float))[clear].all()
    grazing = (turned & (surely != perhaps)).sum() / turned.sum()
    assert grazing < 5e-4  # share of rays that say nothing
    assert 0.01 < surely[clear].mean() < 0.8  # there was something to find


def test_the_sun_over_the_poles_is_seen_as_ray_casting_says(concave):
    table = table_of(concave, columns=32)
    own = np.arange(len(concave.facets))
    poles = np.array([[0.0, 0.0, 1.0], [0.0, 0.0, -1.0]])
    near = np.array([[1e-4, 0, 1.0], [0, -1e-4, -1.0]])  # on meridians 0 and 24
    for directions in (poles, near / np.linalg.norm(near, axis=1, keepdims=True)):
        sees = table.sees(directions)
        surely = naive.rays_blocked(concave, table.samples[:, 0], own, directions, -1e-3)
        perhaps = naive.rays_blocked(concave, table.samples[:, 0], own, directions, 1e-3)
        clear = (concave.normals @ directions.T > 1e-3) & (surely == perhaps)
        assert clear.sum() > 0.4 * clear.size
        assert (sees == ~surely)[clear].all()


def test_share_seen_agrees_with_its_twin_in_any_direction(concave):
    table = table_of(concave, columns=16, lit_samples=4)
    rng = np.random.default_rng(2)
    directions = rng.standard_normal((12, 3))
    sees = table.sees(directions)
    unit = directions / np.linalg.norm(directions, axis=1, keepdims=True)
    turns = np.arctan2(unit[:, 1], unit[:, 0]) / (2 * np.pi)
    for f in rng.choice(len(concave.facets), 30, replace=False):
        wanted = [naive.share_that_sees(table, f, z, t) for z, t in zip(unit[:, 2], turns)]
        assert_allclose(sees[f], wanted, rtol=0, atol=1e-15)


# Against other people's rays


def embree(shape):
    pytest.importorskip("embreex")
    trimesh = pytest.importorskip("trimesh")
    from trimesh.ray.ray_pyembree import RayMeshIntersector

    return RayMeshIntersector(trimesh.Trimesh(shape.vertices_m, shape.facets, process=False))


def lit_by_embree(shape, points, directions, engine):
    """(f, k) does the ray leave? Origins are lifted a little: the engine works in single precision."""
    lifted = points + 1e-6 * shape.diameter_m * shape.normals
    out = np.empty((len(points), len(directions)), bool)
    for k, d in enumerate(directions):
        out[:, k] = ~engine.intersects_any(lifted, np.broadcast_to(d, points.shape))
    return out


def test_a_general_mesh_library_sees_the_same_shadows():
    # trimesh's ray engine over Embree; a ray that passes an edge within 1 % of a facet's height may fall on either side
    shape = make_shape("twolobe", 1280, seed=7)
    table = table_of(shape, columns=32)
    rng = np.random.default_rng(4)
    directions = np.concatenate([sun_over(shape, table, 0, rng) for _ in range(4)])
    lit = lit_by_embree(shape, shape.centroids_m, directions, embree(shape))
    turned = shape.normals @ directions.T > 0.05  # lower, the lift itself carries rays over neighbours
    unlike = (table.sees(directions) != lit) & turned
    assert unlike.sum() < 1e-4 * turned.sum()  # some 80,000 rays
    f, k = np.nonzero(unlike)
    for column in np.unique(k):
        at, d = f[k == column], directions[column : column + 1]
        narrow, wide = (naive.rays_blocked(shape, shape.centroids_m[at], at, d, off) for off in (-0.01, 0.01))
        assert (narrow != wide).all()


def test_between_meridians_the_table_errs_in_proportion_to_their_distance():
    shape = make_shape("cratered", 1280, seed=3)
    rng = np.random.default_rng(6)
    directions = rng.standard_normal((150, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    lit = lit_by_embree(shape, shape.centroids_m, directions, embree(shape))
    turned = shape.normals @ directions.T > 0.01
    wrong = {n: ((table_of(shape, n).sees(directions) != lit) & turned).sum() / turned.sum() for n in (32, 128, 512)}
    assert wrong[32] < 0.02
    assert 3.0 < wrong[32] / wrong[128] < 5.5  # first order in the step of longitude, with the noise of some 10^3 rays
    assert wrong[512] < 0.4 * wrong[128]


# Closed forms


def test_a_ball_in_mid_sky_blocks_a_disc_and_leaves_the_sky_free_above_and_below():
    distance, radius, height = 4.0, 1.0, 5.0
    ground = naive.box([-1, -1, -1], [1, 1, 0])
    ball = make_shape("sphere", 5120, diameter_km=2e-3 * radius)
    shape = naive.together(ground, ball.moved([distance, 0.0, height]))
    table = table_of(shape, columns=360)
    facet = int(np.flatnonzero(ground.normals[:, 2] > 0.9)[0])
    x, y, z = np.array([distance, 0.0, height]) - ground.centroids_m[facet]
    away = np.sqrt(x * x + y * y + z * z)
    for c in range(360):
        lon = naive.longitude_of(table, 0, c)
        # the half-plane's point of view: the ball's middle stands `side` off it, `out` along it
        side, out = x * np.sin(lon) - y * np.cos(lon), x * np.cos(lon) + y * np.sin(lon)
        kept = naive.tabulated(table, facet, 0, c)
        if out < 0 or abs(side) > radius:
            assert kept == []
        elif abs(side) < 0.9 * radius:
            middle = np.arctan2(z, out)
            half = np.arcsin(np.sqrt(radius**2 - side**2) / np.hypot(out, z))  # of the circle in which it is cut
            assert len(kept) == 1
            assert_allclose(np.arcsin(kept[0]), [middle - half, middle + half], rtol=0, atol=2e-3)  # rad: its facets
            assert kept[0][0] > 0.1
            assert kept[0][1] < 0.99
    toward = np.array([x, y, z]) / away
    up = np.array([0.0, 0.0, 1.0])
    over, under = toward + 0.5 * up, toward - 0.6 * up
    assert list(table.sees(np.array([toward, over, under, -toward * [1, 1, -1]]))[facet]) == [0.0, 1.0, 1.0, 1.0]


def test_on_a_body_of_two_lobes_some_facets_see_sky_over_and_under_the_other_lobe():
    tipped = make_shape("twolobe", 1280, seed=1, neck=0.4)
    turn = np.radians(50)
    tipped = tipped.turned(np.array([[np.cos(turn), 0, -np.sin(turn)], [0, 1, 0], [np.sin(turn), 0, np.cos(turn)]]))
    table = table_of(tipped, columns=32)
    found = 0
    for f in table.shadowed_facets:
        for c in range(32):
            lon = naive.longitude_of(table, 0, c)
            n = tipped.normals[f]
            for lo, hi in naive.tabulated(table, f, 0, c):
                free = []
                for sine in (lo - 0.02, hi + 0.02):
                    if abs(sine) >= 1:
                        break
                    d = np.array([np.sqrt(1 - sine**2) * np.cos(lon), np.sqrt(1 - sine**2) * np.sin(lon), sine])
                    if n @ d > 0.05 and naive.free_at(table, f, 0, c, sine):
                        free.append(d)
                if len(free) == 2 and hi - lo > 0.05:
                    found += 1
                    rays = naive.rays_blocked(tipped, table.samples[f, :1], np.array([f]), np.array(free))
                    assert not rays.any()
    assert found > 20


def test_a_roof_straight_above_blocks_the_pole_on_every_meridian():
    ground = naive.box([-1, -1, -1], [1, 1, 0])
    roof = naive.box([-3, -3, 2], [3, 3, 3])
    shape = naive.together(ground, roof)
    table = table_of(shape, columns=24)
    for f in np.flatnonzero(ground.normals[:, 2] > 0.9):
        p = ground.centroids_m[f]
        for c in range(24):
            lon = naive.longitude_of(table, 0, c)
            # where the meridian leaves the roof's underside
            reach = min((3 - p[k] * np.sign(d)) / abs(d) for k, d in ((0, np.cos(lon)), (1, np.sin(lon))) if abs(d) > 0)
            low, high = naive.tabulated(table, f, 0, c)[0]
            assert abs(low - 2 / np.hypot(2, reach)) < 2e-7
            assert high == BEYOND
        assert table.sees([0.0, 0.0, 1.0])[f] == 0.0


@pytest.mark.parametrize("columns", [4, 8, 32])
def test_corners_and_edges_that_lie_on_a_meridian_leave_no_gap_and_no_ghost(columns):
    # everything that matters stands on meridians 0, 45, 90, ... degrees of the point under the spire's tip
    ground = naive.box([-9, -9, -1], [9, 9, 0])
    f = 8 + int(np.flatnonzero(ground.normals[:, 2] > 0.9)[0])
    p = ground.centroids_m[f - 8]
    ring = [[2, 0, 1], [0, 2, 1], [-2, 0, 1], [0, -2, 1]]
    vertices = np.array([*ring, [0, 0, 4], [0, 0, 0.5]], float)
    spire = [(0, 1, 4), (1, 2, 4), (2, 3, 4), (3, 0, 4), (1, 0, 5), (2, 1, 5), (3, 2, 5), (0, 3, 5)]
    shape = naive.together(Shape(vertices + p * [1, 1, 0], np.array(spire)), ground)
    table = table_of(shape, columns)
    for c in range(columns):
        lon = naive.longitude_of(table, 0, c)
        reach = 2 / (abs(np.cos(lon)) + abs(np.sin(lon)))
        kept = naive.tabulated(table, f, 0, c)
        assert len(kept) == 1
        assert_allclose(kept[0], [1 / np.hypot(1, reach), BEYOND], rtol=0, atol=2e-7)


# Overflow


def slats(count):
    ground = naive.box([-0.5, -0.5, -1], [0.5, 0.5, 0])
    middle = np.radians(5 + 80 * (np.arange(count) + 0.5) / count)
    half = np.radians(10 / count)
    bars = []
    for k, m in enumerate(middle):
        gap = half * (1 + k / count)  # gaps of unlike widths
        low, high = 4 * np.tan(m - gap), 4 * np.tan(m + gap)
        bars.append(naive.box([4, -20, low], [4 + 1e-6, 20, high]))
    return naive.together(ground, *bars), int(np.flatnonzero(ground.normals[:, 2] > 0.9)[0])


@pytest.mark.parametrize("count", [3, MOST, MOST + 1, 30])
def test_more_bars_than_are_kept_close_some_gaps_and_never_open_one(count):
    shape, f = slats(count)
    table = table_of(shape, columns=8)
    exact = naive.blocked_on_meridian(shape, table.samples[f, 0], f, 0.0)
    exact = [x for x in exact if x[1] - x[0] > 1e-8]  # the ground's other half lies in the facet's plane
    kept = naive.tabulated(table, f, 0, 0)
    assert len(exact) == count
    # while facets come in there may be more pieces than in the end
    assert min(count, MOST - 2) <= len(kept) <= MOST
    for lo, hi in exact:
        assert any(a <= lo + FLOAT32 and hi - FLOAT32 <= b for a, b in kept)
    ends = {round(x, 6) for pair in exact for x in pair}
    assert {round(x, 6) for pair in kept for x in pair} <= ends
    assert_allclose([kept[0][0], kept[-1][1]], [exact[0][0], exact[-1][1]], rtol=0, atol=FLOAT32)


def test_ordinary_bodies_stay_far_from_the_most_intervals_that_are_kept():
    shape = make_shape("cratered", 1280, seed=1)
    assert np.diff(table_of(shape, 64, 4).starts).max() <= MOST // 2


# Symmetry


CONVEX = {
    "sphere": lambda: make_shape("sphere", 1280),
    "hull": lambda: naive.convex(400, seed=1),
    "sharp hull": lambda: naive.convex(60, (900.0, 300.0, 20.0), seed=2),
    "box": lambda: naive.box([-1, -2, -3], [4, 5, 6], cuts=3),
}


@pytest.mark.parametrize("body", CONVEX)
def test_nothing_overshadows_a_convex_body(body):
    table = table_of(CONVEX[body](), lit_samples=4)
    assert not table.overshadowed.any()
    assert table.overshadowed_fraction == 0.0
    assert len(table.low) == 0
    assert (table.sees(np.eye(3)) == 1.0).all()


@pytest.mark.parametrize("seed", range(4))
def test_flat_sides_cut_into_many_facets_do_not_overshadow_each_other(seed):
    from scipy.spatial.transform import Rotation

    turn = Rotation.random(random_state=seed).as_matrix()
    brick = naive.box([-300, -200, -100], [500, 300, 77], cuts=7).turned(turn).moved([3e4, -2e4, 1e4])
    assert not table_of(brick, 64, 16).overshadowed.any()


@pytest.mark.parametrize("steps", [1, 5, 16])
def test_turning_by_whole_meridians_turns_the_table(steps):
    shape = naive.jagged(180, seed=9)
    one = table_of(shape, 32, 4)
    two = table_of(naive.turned_about_z(shape, 2 * np.pi * steps / 32), 32, 4)
    assert np.array_equal(one.rows, two.rows)
    for f in one.shadowed_facets[::3]:
        for s in range(4):
            for c in range(32):
                before, after = naive.tabulated(one, f, s, c), naive.tabulated(two, f, s, (c + steps) % 32)
                assert len(before) == len(after)
                assert_allclose(np.ravel(before), np.ravel(after), rtol=0, atol=2 * FLOAT32)


def test_size_does_not_matter():
    shape = naive.jagged(180, seed=9)
    one = table_of(shape, 32, 4)
    assert naive.tables_equal(one, replace(table_of(shape.scaled(2.0**20), 32, 4)))  # a power of two rounds alike
    assert naive.tables_equal(one, table_of(shape.scaled(3.7e-4), 32, 4), 2 * FLOAT32)
    assert naive.tables_equal(one, table_of(shape.scaled(1e9), 32, 4), 2 * FLOAT32)


def test_a_mirrored_body_has_a_mirrored_sky():
    shape = naive.jagged(180, seed=2)
    one, two = table_of(shape, 32), table_of(shape.mirrored(), 32)  # x to -x: meridian c to 16 - c
    assert np.array_equal(one.rows, two.rows)
    for f in one.shadowed_facets:
        for c in range(32):
            before, after = naive.tabulated(one, f, 0, c), naive.tabulated(two, f, 0, (16 - c) % 32)
            assert len(before) == len(after)
            assert_allclose(np.ravel(before), np.ravel(after), rtol=0, atol=2 * FLOAT32)


def test_renumbered_facets_and_corners_keep_their_sky():
    shape = naive.jagged(180, seed=5)
    rng = np.random.default_rng(1)
    new_vertex, new_facet = rng.permutation(len(shape.vertices_m)), rng.permutation(len(shape.facets))
    vertices = np.empty_like(shape.vertices_m)
    vertices[new_vertex] = shape.vertices_m
    facets = new_vertex[shape.facets]
    rolled = np.stack([np.roll(t, k) for t, k in zip(facets, rng.integers(0, 3, len(facets)))])
    shuffled = np.empty_like(rolled)
    shuffled[new_facet] = rolled
    one, two = table_of(shape, 32), table_of(Shape(vertices, shuffled), 32)
    assert np.array_equal(one.overshadowed, two.overshadowed[new_facet])
    for f in one.shadowed_facets:
        for c in range(32):
            before, after = naive.tabulated(one, f, 0, c), naive.tabulated(two, new_facet[f], 0, c)
            assert len(before) == len(after)
            assert_allclose(np.ravel(before), np.ravel(after), rtol=0, atol=2 * FLOAT32)


def test_threads_do_not_change_a_bit(monkeypatch):
    shape = naive.jagged(320, seed=5)
    monkeypatch.setenv("SMALLBODY_THREADS", "1")
    one = table_of(shape, 32, 4)
    monkeypatch.setenv("SMALLBODY_THREADS", "3")
    assert naive.tables_equal(one, table_of(shape, 32, 4))


# Coarser tables


def everything(table):
    """Intervals by facet, sample and meridian: a facet with an empty row is as good as one without."""
    each = [(f, s, c) for f in table.shadowed_facets for s in range(len(table.shifts)) for c in range(table.columns)]
    return {where: kept for where in each if (kept := naive.tabulated(table, *where))}


@pytest.mark.parametrize("lit_samples", [1, 4, 16])
def test_every_second_meridian_is_the_table_made_with_half_of_them(lit_samples):
    shape = naive.jagged(80, seed=6)
    thin = table_of(shape, 32, lit_samples).thinned()
    assert thin.columns == 16
    # the meridians of several samples that are left stand closer together than those that 16 meridians would give
    anew = table_of(shape, 16, 1) if lit_samples == 1 else _tabulate(shape, 16, thin.shifts, thin.samples, SILENT)
    assert everything(thin) == everything(anew)


@pytest.mark.parametrize(("lit_samples", "coarser"), [(4, 1), (16, 4)])
def test_every_fourth_sample_is_a_point_of_the_coarser_table(lit_samples, coarser):
    shape = naive.jagged(80, seed=6)
    few = table_of(shape, 16, lit_samples).sampled_coarser()
    assert_allclose(few.samples, table_of(shape, 16, coarser).samples, rtol=0, atol=1e-9)  # m, of a kilometre
    anew = _tabulate(shape, 16, few.shifts, few.samples, SILENT)
    assert everything(few) == everything(anew)


def test_coarser_tables_of_a_convex_body_are_empty_too():
    table = table_of(make_shape("sphere", 80), 16, 4)
    for coarser in (table.thinned(), table.sampled_coarser(), table.thinned().sampled_coarser()):
        assert not coarser.overshadowed.any()
        assert (coarser.sees(np.eye(3)) == 1.0).all()


# What is asked wrongly


def test_directions_are_three_numbers_each():
    table = table_of(make_shape("sphere", 80), 16)
    for wrong in (np.ones((4, 2)), np.ones((2, 3, 3)), 1.0):
        with pytest.raises(SizeMismatch, match=r"\(k, 3\)"):
            table.sees(wrong)
    assert table.sees([0.0, 0.0, 2.0]).shape == (80, 1)


@pytest.mark.parametrize("wrong", [[0.0, 0.0, 0.0], [np.nan, 0.0, 1.0], [np.inf, 0.0, 0.0]])
def test_directions_without_a_direction_are_refused(wrong):
    table = table_of(make_shape("sphere", 80), 16)
    with pytest.raises(ValueError, match="direction 1 is"):
        table.sees(np.array([[0.0, 0.0, 1.0], wrong]))


def test_other_numbers_of_samples_are_refused():
    with pytest.raises(ShapeError, match="1, 4 or 16"):
        horizons_of(make_shape("sphere", 80), 16, 5, cache=False)


def test_without_shadows_everything_is_seen():
    shape = naive.jagged(80, seed=6)
    table = no_shadows(shape, 16)
    assert table.columns == 16
    assert not table.overshadowed.any()
    assert (table.sees(np.random.default_rng(0).standard_normal((9, 3))) == 1.0).all()
    assert table.thinned().columns == 8
