"""`drift` against an independent program that shares no code with it; see independent/README.md."""

import json
from pathlib import Path

import pytest

from smallbody import drift, read_body

CASES = Path(__file__).parent / "independent"
DRIFT = 2e-3  # relative; nine such bodies agreed within 1e-3 when this was written
SPIN = 3e-2  # relative to the spin rate itself: shadows at 16 points a facet of these coarse bodies leave up to 2.3 %


@pytest.mark.parametrize("case", sorted(CASES.glob("*.toml")), ids=lambda p: p.stem)
@pytest.mark.filterwarnings("ignore::smallbody.errors.Note")
def test_drift_agrees_with_an_independent_program(case):
    body = read_body(case).changed({"solver.halved_shape": False})
    result = drift(body)
    theirs = json.loads(case.with_suffix(".json").read_text())
    value = theirs["orbit"]["da_dt_au_per_myr"]["value"]
    assert result.orbit.da_dt_au_per_myr.value == pytest.approx(value, rel=DRIFT)
    value = theirs["spin"]["domega_dt_rad_per_d2"]["value"]
    assert result.spin.domega_dt_rad_per_d2.value == pytest.approx(value, rel=SPIN)
    for key in ("di_dt_deg_per_myr", "dnode_dt_deg_per_myr", "dperi_dt_deg_per_myr", "de_dt_per_myr"):
        one = theirs["orbit"][key]
        if one["value"] is not None and abs(one["value"]) > 20 * one["numerical_error"]:
            rate = getattr(result.orbit, key)
            assert rate.value == pytest.approx(one["value"], rel=1e-2, abs=3 * rate.numerical_error), key


@pytest.mark.slow
@pytest.mark.parametrize("e", [0.7, 0.9, 0.96])
def test_the_lag_solver_agrees_with_marching_on_very_eccentric_orbits(e):
    body = read_body(CASES / "case_3.toml").changed(
        {"solver.halved_shape": False, "solver.lit_samples": 4, "orbit.a_au": 1.5, "orbit.e": e, "spin.period_h": 11.0}
    )
    lag, march = drift(body), drift(body.changed({"solver.method": "march"}))
    for key in ("da_dt_au_per_myr", "de_dt_per_myr"):
        assert getattr(lag.orbit, key).value == pytest.approx(getattr(march.orbit, key).value, rel=2e-3), key
