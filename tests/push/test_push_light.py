"""Light pressure on plates and spheres, and what follows from it for dust: against geometry and handbook figures."""

import numpy as np
import pytest
from push_bodies import body, hull, lump, shape

from smallbody.constants import AU_M, C_M_S, GM_SUN, SOLAR_FLUX_1AU, SUN_W
from smallbody.light import light_sums, no_shadows, places_at, sun_on_body
from smallbody.push import drift
from smallbody.push.recoil import push_of_light

PLATE_M = 100.0


def plate():
    """A box a hundred metres square and a tenth of a millimetre thick, lying in the equator."""
    half = np.array([PLATE_M, PLATE_M, 1e-4]) / 2
    return hull([half * [x, y, z] for x in (-1, 1) for y in (-1, 1) for z in (-1, 1)])


def face_on(**changes):
    """A drift of the plate whose pole looks to the Sun at perihelion, which is at 1 au."""
    return drift(
        body(
            spin__obliquity_deg=90.0, spin__pole_azimuth_deg=180.0, orbit__a_au=1.0, orbit__e=0.0,
            solver__shadows=False, solver__light_places=8, **changes,
        ),
        shape=plate(),
    )  # fmt: skip


def in_units_of_light(result, source, area_m2=PLATE_M**2):
    """Force at perihelion, radial, transverse and normal, over sunlight times area over c."""
    kind = ["thermal", "scattered", "direct"].index(source)
    return np.asarray(result.arrays["force_n"].values)[kind, 0] / (SOLAR_FLUX_1AU * area_m2 / C_M_S)


def test_sunlight_presses_with_a_third_of_a_millionth_of_a_newton_for_each_kilowatt():
    """1000 W/m2 give 3.34e-6 Pa, 1361 W/m2 give 4.54e-6 Pa (common practice)."""
    result = face_on(surface__bond_albedo=0.0)
    newton = np.asarray(result.arrays["force_n"].values)[2, 0, 0]
    assert newton / PLATE_M**2 == pytest.approx(4.54e-6, rel=1e-3)
    assert newton / PLATE_M**2 * 1000 / 1361 == pytest.approx(3.34e-6, rel=2e-3)


def test_a_black_plate_seen_face_on_takes_one_unit_and_gives_heat_back_with_two_thirds():
    """Absorbed light: 1; heat given back at once by Lambert's law from the lit side: 2/3 (geometry)."""
    black = face_on(surface__bond_albedo=0.0, surface__thermal_inertia=0.0)
    assert in_units_of_light(black, "direct") == pytest.approx([1, 0, 0], abs=1e-5)  # its edges are 4e-6 of it
    assert in_units_of_light(black, "scattered") == pytest.approx([0, 0, 0], abs=1e-15)
    assert in_units_of_light(black, "thermal") == pytest.approx([2 / 3, 0, 0], abs=1e-5)


def test_a_white_plate_seen_face_on_takes_five_thirds():
    """Lambert white: 5/3 (geometry)."""
    white = face_on(surface__bond_albedo=1.0)
    total = sum(in_units_of_light(white, s) for s in ("thermal", "scattered", "direct"))
    assert total == pytest.approx([5 / 3, 0, 0], abs=1e-5)
    assert in_units_of_light(white, "thermal") == pytest.approx([0, 0, 0], abs=1e-15)


@pytest.mark.parametrize("slant", [20.0, 55.0, 80.0])
def test_a_plate_seen_at_a_slant_is_pushed_along_the_light_and_along_its_normal(slant):
    """Direct -(S mu/c) u dA, scattered -(2/3)(A S mu/c) n dA, along the pole when it spins (geometry)."""
    tilt = np.radians(90.0 - slant)
    one, albedo = plate(), 0.4
    places = places_at(AU_M, 0.0, np.zeros(1), np.ones(1))
    sun = sun_on_body(places, tilt, np.pi)
    pushes = push_of_light(light_sums(one, no_shadows(one), sun, np.ones(1)).fine, places, sun, albedo)
    unit, mu = SOLAR_FLUX_1AU * PLATE_M**2 / C_M_S, np.cos(np.radians(slant))
    pole = np.array([-np.sin(tilt), 0.0, np.cos(tilt)])
    edges = 5e-6  # the part of the light that falls on them
    assert pushes["direct"].force[0] / unit == pytest.approx([mu, 0, 0], abs=edges)
    assert pushes["scattered"].force[0] / unit == pytest.approx(-2 / 3 * albedo * mu * pole, abs=edges)
    assert pushes["absorbed"].force[0] / unit == pytest.approx(-2 / 3 * (1 - albedo) * mu * pole, abs=edges)


def test_a_white_sphere_takes_four_ninths_more_than_a_black_one():
    """In units of S pi R^2/c: black 1, Lambert white 1 + 4/9 (geometry); facets come near with their number."""
    missing = []
    for facets in (320, 1280):
        white = drift(
            body(surface__bond_albedo=1.0, orbit__a_au=1.0, orbit__e=0.0, solver__shadows=False),
            shape=shape("sphere", facets),
        )
        area = np.pi * 250.0**2
        direct, scattered = (in_units_of_light(white, s, area) for s in ("direct", "scattered"))
        assert direct == pytest.approx([1, 0, 0], abs=0.02)
        assert (scattered / direct[0])[0] == pytest.approx(4 / 9, abs=0.003)
        missing.append(np.abs([direct[0] - 1, scattered[0] - 4 / 9]))
    assert missing[1] == pytest.approx(missing[0] / 4, rel=0.1)  # second order in the size of the facets


def test_beta_of_black_dust_is_the_published_one():
    """beta = 0.574 Q_pr/(rho s), rho in g/cm3, s in um (Burns, Lamy & Soter 1979, Icarus 40, 1; number from memory);
    spun so fast that its heat leaves evenly all round the day, a black grain has Q_pr = 1."""
    for micron, density in ((5.0, 2500.0), (0.8, 1000.0)):
        asked = body(
            shape__diameter_km=2e-9 * micron, shape__sphere_facets=1280, bulk__density_kg_m3=density,
            surface__bond_albedo=0.0, surface__thermal_inertia=10_000.0, spin__obliquity_deg=0.0, spin__period_h=1e-4,
            solver__shadows=False, orbit__e=0.1,
        )  # fmt: skip
        beta = drift(asked).acceleration.beta
        assert beta == pytest.approx(0.574 / (density / 1000 * micron), rel=0.006)


def test_beta_and_area_to_mass_belong_together():
    """For light that arrives beta = (L/(4 pi c G M)) times lit area over mass, 7.65e-4 kg/m2 (Burns, Lamy & Soter 1979;
    from memory), whatever the shape."""
    assert SUN_W / (4 * np.pi * C_M_S * GM_SUN) == pytest.approx(7.65e-4, rel=2e-3)
    found = drift(body(surface__bond_albedo=0.0, surface__thermal_inertia=0.0, solver__shadows=False), shape=lump())
    mass, force = found.provenance["mass_kg"], np.asarray(found.arrays["force_n"].values)[2, :, 0]
    weight = np.asarray(found.arrays["place_weight"].values)
    distance = np.asarray(found.arrays["place_sun_distance_au"].values) * AU_M
    by_gravity = weight @ (force / mass / (GM_SUN / distance**2))
    assert by_gravity == pytest.approx(7.65e-4 * found.acceleration.area_to_mass_m2_per_kg, rel=2e-3)


def test_the_lit_area_of_a_sphere_is_its_disc():
    found = drift(body(solver__shadows=False), shape=shape("sphere", 1280)).acceleration.area_to_mass_m2_per_kg
    mass = 2000.0 * 4 / 3 * np.pi * 250.0**3
    assert found == pytest.approx(np.pi * 250.0**2 / mass, rel=0.004)


def test_light_that_arrives_pushes_away_from_the_sun_and_nowhere_else():
    force = np.asarray(drift(body(), shape=shape("cratered", 80)).arrays["force_n"].values)
    direct = force[2]
    assert (direct[:, 0] > 0).all()
    assert np.abs(direct[:, 1:]).max() < 1e-12 * direct[:, 0].max()


def test_the_orbit_is_not_drifted_by_light_that_arrives_on_a_body_of_constant_disc():
    """A radial push that goes as 1/r^2 changes the Sun's mass, no element in the mean but the mean anomaly."""
    found = drift(body(orbit__e=0.4), shape=shape("sphere", 1280))
    direct = found.by_source["direct"].orbit
    natural = abs(direct.dmean_anomaly_dt_deg_per_myr.value)
    assert abs(np.degrees(direct.de_dt_per_myr.value)) < 1e-4 * natural
    assert abs(direct.dperi_dt_deg_per_myr.value) < 1e-4 * natural
    # 2 beta n: a and v stay, so that the body is found where it would be about a lighter Sun
    beta = 7.65e-4 * found.acceleration.area_to_mass_m2_per_kg
    n = np.degrees(np.sqrt(GM_SUN / (1.2 * AU_M) ** 3)) * 365.25e6 * 86400
    assert direct.dmean_anomaly_dt_deg_per_myr.value == pytest.approx(-2 * beta * n, rel=3e-3)
