"""A real result goes to its file with all that is needed to trust it and to compute it again."""

import json

import numpy as np
import pytest
import xarray

import smallbody
from smallbody.body import Body, Bulk, Orbit, ShapeSource, Solver, Spin, Surface, read_body
from smallbody.store import load, save


@pytest.fixture(scope="module")
def result():
    return smallbody.drift(
        Body(
            name='Kiesel "ß"',
            shape=ShapeSource(sphere_facets=80, diameter_km=0.5),
            bulk=Bulk(density_kg_m3=2000.0),
            surface=Surface(bond_albedo=0.05, emissivity=0.9, thermal_inertia=200.0),
            spin=Spin(period_h=5.0, obliquity_deg=0.0),
            orbit=Orbit(a_au=1.2, e=0.1),
            solver=Solver(lit_samples=1, rotation_nodes=16, light_places=16, orbit_places=8, halved_shape=False),
        )
    )


def test_everything_a_run_answered_is_in_its_file(result, tmp_path):
    save(result, tmp_path / "r.h5")
    back = load(tmp_path / "r.h5")
    assert (back.kind, back.name) == ("drift", 'Kiesel "ß"')
    for name, quantity in result.arrays.items():
        np.testing.assert_array_equal(back.arrays[name].values, quantity.values)
        assert back.arrays[name].dims == quantity.dims
        assert back.arrays[name].units == quantity.units
    assert json.loads(back.attrs["result_json"]) == json.loads(json.dumps(result.to_dict()))
    assert back.attrs["shape_sha256"] == result.provenance["shape_sha256"]
    assert {"smallbody", "numpy", "h5py", "hdf5"} <= set(json.loads(back.attrs["versions"]))
    assert back.attrs["created_utc"].endswith("+00:00")


def test_the_inputs_in_the_file_describe_the_same_body_again(result, tmp_path):
    save(result, tmp_path / "r.h5")
    (tmp_path / "again.toml").write_text(load(tmp_path / "r.h5").attrs["body_toml"], encoding="utf-8")
    assert read_body(tmp_path / "again.toml").to_dict() == result.provenance["body"]


def test_undefined_rates_are_null_in_the_json_and_nan_in_the_arrays(result, tmp_path):
    save(result, tmp_path / "r.h5")
    back = load(tmp_path / "r.h5")
    assert json.loads(back.attrs["result_json"])["orbit"]["dnode_dt_deg_per_myr"]["value"] is None
    rate = list(back.arrays["rate"].values).index("dnode_dt_deg_per_myr")
    assert np.isnan(back.arrays["rate_value"].values[0, rate])


def test_a_real_result_opens_in_xarray_by_names(result, tmp_path):
    save(result, tmp_path / "r.h5")
    with xarray.open_dataset(tmp_path / "r.h5", engine="h5netcdf") as data:
        assert data.facet_temperature_k.dims == ("facet", "rotation")
        assert data.facet_temperature_k.units == "K"
        drift = float(data.rate_value.sel(source_total="total", rate="da_dt_au_per_myr"))
        assert drift == result.orbit.da_dt_au_per_myr.value
        force = data.force_n.sel(source="thermal", orbit_axis="transverse")
        assert force.dims == ("place",)
        assert float((force * data.place_weight).sum()) > 0.0  # a prograde rotator is pushed along its motion


def test_what_is_loaded_can_be_saved(result, tmp_path):
    save(result, tmp_path / "r.h5")
    save(load(tmp_path / "r.h5"), tmp_path / "s.h5")
    assert load(tmp_path / "s.h5").attrs == load(tmp_path / "r.h5").attrs
