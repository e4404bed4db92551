"""Stated numerical errors against true ones; the whole experiment is tests/bench/bench_errors.py."""

import sys
from pathlib import Path

import numpy as np
import pytest
from push_bodies import BODY, body, lump, rates_of, scales, shape

from smallbody.push import drift

sys.path.insert(0, str(Path(__file__).parents[1] / "bench"))

import bench_errors

CASES = 8


@pytest.fixture(scope="module")
def found():
    """Eight small bodies at the default settings, but for fewer facets."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("SMALLBODY_CACHE", "off")
        return [
            bench_errors.one(changes, one, BODY.solver.rotation_nodes, 16)
            for _, changes, one in bench_errors.cases(CASES, 80, seed=11)
        ]


def test_true_errors_stay_within_one_and_a_half_of_the_stated_in_four_of_five_cases(found):
    count, within, further, _ = bench_errors.coverage(found)["all"]
    assert count > 5 * CASES
    assert further >= 0.8
    assert within >= 0.6


def test_stated_errors_are_not_padded(found):
    """The median true error is a fair part of the stated one: an error bar ten times too long says nothing either."""
    ratios = [true / stated for case in found for stated, true, _ in case.values() if stated > bench_errors.FLOOR]
    assert np.median(ratios) > 0.1


def test_what_a_coarser_repeat_changes_is_more_than_what_is_left(found):
    for cause in ("rotation_nodes", "orbit_places"):
        _, median, _ = bench_errors.left(found, cause)
        assert median < 0.6


def test_cutting_facets_in_four_makes_the_same_body():
    one = shape("twolobe", 80)
    cut = bench_errors.cut_in_four(one)
    assert len(cut.facets) == 4 * len(one.facets)
    assert cut.mass.volume_m3 == pytest.approx(one.mass.volume_m3, rel=1e-12)
    a, b = (rates_of(drift(body(solver__shadows=False), shape=s))[0] for s in (one, cut))
    natural = scales(drift(body(solver__shadows=False), shape=one))
    for k in a:  # the larger number of facets is served by the table of open skies
        assert abs(a[k] - b[k]) < 5e-5 * natural[k], k


@pytest.mark.parametrize(("key", "coarse", "fine"), [("rotation_nodes", 32, 64), ("orbit_places", 24, 48)])
def test_finer_settings_have_smaller_errors(key, coarse, fine):
    one = lump()
    a, b = (drift(body(orbit__e=0.3, **{f"solver__{key}": n}), shape=one) for n in (coarse, fine))
    assert b.orbit.da_dt_au_per_myr.numerical_error < 0.6 * a.orbit.da_dt_au_per_myr.numerical_error
    moved = abs(a.orbit.da_dt_au_per_myr.value - b.orbit.da_dt_au_per_myr.value)
    assert moved < 2 * a.orbit.da_dt_au_per_myr.numerical_error


def test_the_transverse_coefficient_is_as_uncertain_as_the_drift_of_a_circular_orbit():
    result = drift(body(orbit__e=0.0), shape=shape("cratered", 80))
    a2, error = result.acceleration.a2_au_per_d2, result.acceleration.numerical_error["a2_au_per_d2"]
    assert error / abs(a2) == pytest.approx(result.orbit.da_dt_au_per_myr.relative_error, rel=1e-9)
    assert set(result.acceleration.numerical_error) == {"a1_au_per_d2", "a2_au_per_d2", "a3_au_per_d2"}
