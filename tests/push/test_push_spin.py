"""The torque of sunlight: what published theorems, mirrors and a windmill say of it."""

import numpy as np
import pytest
from push_bodies import ORBIT_KEYS, SPIN_KEYS, body, lump, rates_of, scales, shape

from smallbody.push import drift
from smallbody.shape import Shape, make_shape


def spin_rate(result, source=None):
    """Change of the spin rate over its natural scale (mean sunlight/c times radius cubed, over the moment)."""
    part = result if source is None else result.by_source[source]
    return part.spin.domega_dt_rad_per_d2.value / result.checks.spin_scale_rad_per_d2


# --- theorems --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("obliquity", [0.0, 35.0, 90.0, 180.0])
@pytest.mark.parametrize("kind", ["sphere", "triaxial ellipsoid"])
def test_symmetric_bodies_have_no_mean_spin_torque(kind, obliquity):
    """Rubincam 2000, Icarus 148, 2."""
    one = shape("sphere", 320)
    if kind == "triaxial ellipsoid":
        one = Shape(one.vertices_m * [1.4, 1.0, 0.7], one.facets)
    asked = body(spin__obliquity_deg=obliquity, surface__bond_albedo=0.3)
    result = drift(asked, shape=one)
    assert abs(spin_rate(result)) < 1e-14
    tilting = abs(rates_of(result)[0]["dobliquity_dt_deg_per_myr"]) / scales(result)["dobliquity_dt_deg_per_myr"]
    if kind == "sphere":  # the heat that lags on a sphere twists nothing either
        assert tilting < 1e-4
    elif obliquity == 35.0:
        assert tilting > 1e-3


def test_the_facets_of_an_ellipsoid_hardly_twist_it():
    """What the theorem leaves to facets that do not lie symmetrically."""
    for facets in (320, 1280):
        result = drift(body(), shape=shape("ellipsoid", facets, axes=(0.35, 0.25, 0.17)))
        assert abs(spin_rate(result)) < 5e-5


@pytest.mark.parametrize("kind", ["twolobe", "gaussian"])
def test_the_mean_spin_torque_does_not_depend_on_thermal_inertia_and_the_obliquity_torque_does(kind):
    """Capek & Vokrouhlicky 2004, Icarus 172, 526; Breiter et al. 2010, abstract: within 1-D conduction."""
    results = [drift(body(surface__thermal_inertia=g), shape=shape(kind, 80)) for g in (0.0, 40.0, 400.0, 10_000.0)]
    spin = np.array([spin_rate(r) for r in results])
    assert abs(spin[0]) > 1e-4
    assert np.abs(spin - spin[0]).max() < 1e-7  # as far as heat is settled
    tilt = np.array([r.spin.dobliquity_dt_deg_per_myr.value for r in results])
    assert np.abs(tilt / tilt[0] - 1)[1:].min() > 0.05
    assert np.abs(tilt / tilt[0] - 1).max() > 0.5


def test_the_spin_torque_of_absorbed_and_of_scattered_light_share_by_the_albedo():
    """Both leave by Lambert's law: thermal and scattered go as 1 - A to A, and add up to what no albedo changes."""
    one = shape("twolobe", 80)
    dark, bright = (drift(body(surface__bond_albedo=a), shape=one) for a in (0.0, 0.6))
    assert spin_rate(bright, "thermal") == pytest.approx(0.4 * spin_rate(dark, "thermal"), rel=1e-7)
    assert spin_rate(bright, "scattered") == pytest.approx(0.6 * spin_rate(dark, "thermal"), rel=1e-7)
    assert spin_rate(bright) == pytest.approx(spin_rate(dark), rel=1e-7)


def test_light_that_arrives_gives_convex_bodies_no_mean_spin_torque():
    """Nesvorny & Vokrouhlicky 2008, A&A 480, 1; from memory."""
    result = drift(body(), shape=lump())
    assert abs(spin_rate(result)) > 1e-3
    assert abs(result.checks.direct_spin_residual) < 1e-13
    assert result.checks.direct_spin_residual == pytest.approx(spin_rate(result, "direct"), abs=1e-15)


@pytest.mark.parametrize(("kind", "facets"), [("twolobe", 240), ("gaussian", 240)])
def test_light_that_arrives_gives_concave_bodies_the_less_spin_torque_the_better_shadows_are_sampled(kind, facets):
    """The same theorem: what is left is the error of the shadows, and a share of the whole torque."""
    one = shape(kind, facets)
    left, whole = {}, {}
    for samples in (1, 4, 16):
        result = drift(body(solver__lit_samples=samples), shape=one)
        assert result.checks.overshadowed_fraction > 0.2
        left[samples], whole[samples] = abs(result.checks.direct_spin_residual), abs(spin_rate(result))
    assert left[16] < left[1] / 4
    assert left[16] < 0.005 * whole[16]
    assert left[4] < 0.05 * whole[4]


# --- mirrors ---------------------------------------------------------------------------------------------------------

# Seen in a mirror that holds the spin pole and the orbit normal, a body spins and orbits the other way round. Where
# heat is given back at once that does not matter to the means, and neither does the sense of rotation. A torque is an
# axial vector: in such a mirror its parts in the mirror's plane (along the pole, towards the orbit normal) flip and the
# part across stays. A force keeps its parts in the plane; places at true anomaly f and -f change places. With the
# pole's azimuth and the argument of perihelion 0 that makes:
FLIP = ("da_dt_au_per_myr", "da_dt_m_per_yr", "de_dt_per_myr", "dnode_dt_deg_per_myr", "domega_dt_rad_per_d2",
        "dobliquity_dt_deg_per_myr")  # fmt: skip
STAY = ("di_dt_deg_per_myr", "dperi_dt_deg_per_myr", "dmean_anomaly_dt_deg_per_myr", "dazimuth_dt_deg_per_myr")


def in_the_mirror(one, **changes):
    asked = body(spin__pole_azimuth_deg=0.0, orbit__peri_deg=0.0, orbit__e=0.3, **changes)
    return drift(asked, shape=one), drift(asked, shape=one.mirrored())


def test_the_mirror_image_of_a_convex_body_has_the_opposite_spin_torque():
    one, other = in_the_mirror(lump(), surface__thermal_inertia=0.0)
    (a, _), (b, _), natural = rates_of(one), rates_of(other), scales(one)
    assert abs(a["domega_dt_rad_per_d2"]) > 1e-3 * natural["domega_dt_rad_per_d2"]
    for keys, sign in ((FLIP, -1), (STAY, 1)):
        for k in keys:
            assert abs(a[k] - sign * b[k]) < 1e-10 * natural[k], k


@pytest.mark.parametrize("gamma", [50.0, 1000.0])
def test_the_mirror_image_has_the_opposite_spin_torque_whatever_the_thermal_inertia(gamma):
    one, other = in_the_mirror(lump(), surface__thermal_inertia=gamma)
    assert spin_rate(one) == pytest.approx(-spin_rate(other), rel=1e-7)
    assert spin_rate(one, "scattered") == pytest.approx(-spin_rate(other, "scattered"), rel=1e-9)
    # heat that lags knows which way the body turns: the obliquity rate does not simply flip, and the drift stays
    tilt, mirrored = (r.spin.dobliquity_dt_deg_per_myr.value for r in (one, other))
    assert abs(tilt + mirrored) > 0.1 * abs(tilt)
    assert one.orbit.da_dt_au_per_myr.value == pytest.approx(other.orbit.da_dt_au_per_myr.value, rel=0.01)


@pytest.mark.parametrize("kind", ["twolobe", "cratered"])
def test_the_mirror_image_of_a_concave_body_has_the_opposite_spin_torque_within_the_errors(kind):
    one, other = in_the_mirror(shape(kind, 80), surface__thermal_inertia=0.0, solver__lit_samples=16)
    natural = scales(one)
    for source in (None, "scattered"):
        (a, a_error), (b, b_error) = rates_of(one, source=source), rates_of(other, source=source)
        for keys, sign in ((FLIP, -1), (STAY, 1)):
            for k in keys:
                assert abs(a[k] - sign * b[k]) < a_error[k] + b_error[k] + 1e-4 * natural[k], (source, k)


def test_turned_upside_down_a_body_is_another_body_to_the_same_sun():
    """Half a turn about x: the same as the opposite pole. Prograde becomes retrograde; without lag, the torque along
    the body's own axis, now the other pole, has the other sign."""
    one = lump()
    over = one.turned(np.diag([1.0, -1.0, -1.0]))
    asked = {"surface__thermal_inertia": 0.0, "orbit__e": 0.0}
    up, down = (
        drift(body(**asked, spin__obliquity_deg=tilt, spin__pole_azimuth_deg=azimuth), shape=s)
        for tilt, azimuth, s in ((30.0, 0.0, one), (150.0, 180.0, over))
    )
    assert spin_rate(up) == pytest.approx(-spin_rate(down), rel=1e-9)
    for k in ("di_dt_deg_per_myr", "dnode_dt_deg_per_myr", "da_dt_au_per_myr"):
        assert rates_of(up)[0][k] == pytest.approx(rates_of(down)[0][k], rel=1e-9, abs=1e-15), k


# --- a windmill ------------------------------------------------------------------------------------------------------


def test_a_windmill_spins_up_or_down_as_it_was_made_to():
    turned = {}
    for hand in (1, -1):
        one = make_shape("windmill", 1280, hand=hand, diameter_km=0.5)
        rate = drift(body(spin__obliquity_deg=0.0, solver__lit_samples=16), shape=one).spin.domega_dt_rad_per_d2
        turned[hand] = rate.value
        assert rate.value * hand > 2 * rate.numerical_error
    assert turned[1] == pytest.approx(-turned[-1], rel=0.3)


def test_the_poles_of_the_orbit_are_alike_to_the_spin_torque():
    """Upside down in its orbit a body sees the same Sun in the mirror: obliquity 0 and 180 spin it up alike."""
    one = shape("twolobe", 80)
    a, b = (drift(body(spin__obliquity_deg=x, solver__lit_samples=16), shape=one) for x in (0.0, 180.0))
    assert spin_rate(a) == pytest.approx(spin_rate(b), rel=1e-6)
    assert a.orbit.da_dt_au_per_myr.value == pytest.approx(-b.orbit.da_dt_au_per_myr.value, rel=2e-2)


def test_every_rate_has_a_source_and_they_add_up():
    result = drift(body(surface__bond_albedo=0.4), shape=shape("cratered", 80))
    total, _ = rates_of(result)
    parts = [rates_of(result, source=s)[0] for s in ("thermal", "scattered", "direct")]
    for k in ORBIT_KEYS + SPIN_KEYS:
        assert total[k] == pytest.approx(sum(p[k] for p in parts), rel=1e-12, abs=1e-14 * scales(result)[k]), k
