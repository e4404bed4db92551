"""What is written is read back, opens elsewhere with its names, and is refused when it is not what it says."""

import subprocess
import sys
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as some

from smallbody.errors import SizeMismatch, StoreError
from smallbody.quantity import Quantity
from smallbody.store import Stored, image, load, write
from smallbody.store import hdf5 as inside

OLD = Path(__file__).parent / "old"


def example() -> Stored:
    rng = np.random.default_rng(3)
    text = lambda *words: np.array(words, dtype=object)  # noqa: E731
    return Stored(
        "drift",
        {
            "facet_temperature_k": Quantity(
                rng.normal(250, 30, (700, 64)).astype(np.float32), ("facet", "rotation"), "K", "surface temperature"
            ),
            "subsolar_longitude_deg": Quantity(
                np.linspace(0, -354.375, 64), ("rotation",), "deg", "where the Sun stands"
            ),
            "facet_overshadowed": Quantity(
                rng.random(700) < 0.3, ("facet",), "1", "whether another facet can hide the Sun"
            ),
            "source": Quantity(text("thermal", "scattered", "direct"), ("source",), "", "cause of the force"),
            "force_n": Quantity(rng.normal(size=(3, 24)), ("source", "place"), "N", "force"),
            "place": Quantity(np.arange(24) * 15.0, ("place",), "deg", "mean anomaly"),
            "radius_m": Quantity(np.array(250.0), (), "m", "radius"),
        },
        {"name": "Kiesel 'ß' $7", "body_toml": 'name = "x"\n[bulk]\n', "result_json": "{}" * 50_000, "facets": 700},
    )


def same(a: Stored, b: Stored) -> None:
    assert a.kind == b.kind
    assert dict(a.attrs) == dict(b.attrs)
    for name, quantity in a.arrays.items():
        back = b.arrays[name]
        assert (back.dims, back.units, back.about) == (quantity.dims, quantity.units, quantity.about)
        np.testing.assert_array_equal(back.values, quantity.values)


def test_what_is_written_is_read_back(tmp_path):
    write(example(), tmp_path / "r.h5")
    back = load(tmp_path / "r.h5")
    same(example(), back)
    assert back.name == "Kiesel 'ß' $7"
    assert back.arrays["facet_temperature_k"].values.dtype == np.float32
    assert set(back.arrays) - set(example().arrays) == {
        "facet",
        "rotation",
    }  # the axes without a coordinate are numbered
    np.testing.assert_array_equal(back.arrays["rotation"].values, np.arange(64))


def test_what_is_read_can_be_written_again_to_the_same_bytes(tmp_path):
    write(example(), tmp_path / "r.h5")
    write(load(tmp_path / "r.h5"), tmp_path / "s.h5")
    write(load(tmp_path / "s.h5"), tmp_path / "t.h5")
    assert (tmp_path / "s.h5").read_bytes() == (tmp_path / "t.h5").read_bytes()


def test_the_same_result_gives_the_same_bytes_in_another_process(tmp_path):
    code = f"import sys; sys.path.insert(0, {str(Path(__file__).parent)!r}); import test_store_hdf5 as t; "
    code += f"t.write(t.example(), {str(tmp_path / 'other.h5')!r})"
    subprocess.run([sys.executable, "-c", code], check=True)
    assert (tmp_path / "other.h5").read_bytes() == image(example())


def test_a_file_written_through_the_disk_equals_one_made_in_memory(tmp_path, monkeypatch):
    monkeypatch.setattr(inside, "IN_MEMORY_BYTES", 0)
    write(example(), tmp_path / "r.h5")
    same(example(), load(tmp_path / "r.h5"))
    assert (tmp_path / "r.h5").read_bytes() == image(example())


axis_lengths = st.fixed_dictionaries({"facet": st.integers(1, 5), "place": st.integers(1, 3), "axis": st.just(3)})
words = st.text(st.characters(exclude_characters="\x00", exclude_categories=["Cs"]), max_size=12)


@st.composite
def results(draw) -> Stored:
    lengths = draw(axis_lengths)
    arrays = {}
    for i in range(draw(st.integers(0, 5))):
        dims = tuple(draw(st.lists(st.sampled_from(sorted(lengths)), unique=True, max_size=3)))
        dtype = draw(st.sampled_from(["f8", "f4", "i4", "i8", "i1", "text"]))
        shape = tuple(lengths[d] for d in dims)
        elements = {"elements": words} if dtype == "text" else {}
        values = draw(some.arrays(object if dtype == "text" else np.dtype(dtype), shape, **elements))
        arrays[f"q{i}"] = Quantity(values, dims, "" if dtype == "text" else draw(words), draw(words))
    attrs = draw(
        st.dictionaries(st.sampled_from("abc"), words | st.integers(-(2**62), 2**62) | st.floats(allow_nan=False))
    )
    return Stored(draw(words), arrays, attrs)


@given(results())
@settings(max_examples=60, deadline=None)
def test_any_result_is_read_back(tmp_path_factory, result):
    path = tmp_path_factory.mktemp("any") / "r.h5"
    write(result, path)
    same(result, load(path))


def test_xarray_opens_it_with_named_axes_coordinates_and_units(tmp_path):
    write(example(), tmp_path / "r.h5")
    with xarray.open_dataset(tmp_path / "r.h5", engine="h5netcdf") as data:
        assert dict(data.sizes) == {"facet": 700, "rotation": 64, "source": 3, "place": 24}
        assert data.facet_temperature_k.dims == ("facet", "rotation")
        assert data.facet_temperature_k.attrs["units"] == "K"
        assert data.facet_temperature_k.attrs["long_name"] == "surface temperature"
        assert data.attrs["name"] == "Kiesel 'ß' $7"
        there = data.force_n.sel(source="scattered", place=30.0)
        assert float(there) == example().arrays["force_n"].values[1, 2]
        assert data.radius_m.dims == ()


def test_plain_hdf5_finds_a_scale_on_every_axis(tmp_path):
    write(example(), tmp_path / "r.h5")
    with h5py.File(tmp_path / "r.h5") as file:
        for dataset in file.values():
            assert dataset.is_scale or [d[0].name for d in dataset.dims] == [f"/{x}" for x in dims_of(dataset)]
        assert file.attrs["layout"] == 1


def dims_of(dataset: h5py.Dataset) -> tuple[str, ...]:
    return example().arrays[dataset.name[1:]].dims


def test_an_old_file_still_opens():
    back = load(OLD / "layout-1.h5")
    assert back.kind == "drift"
    assert back.name == "old pebble"
    np.testing.assert_array_equal(back.arrays["facet_temperature_k"].values, [[100.0, 200.5], [300.0, 50.0]])
    assert back.arrays["facet_temperature_k"].units == "K"
    assert list(back.arrays["source"].values) == ["thermal", "direct"]


# what does not fit together


@pytest.mark.parametrize(("arrays", "words"), [
    ({"a": ((3,), ("x",)), "b": ((4,), ("x",))}, "axis x is 4 long in b and 3 elsewhere"),
    ({"a": ((3, 3), ("x", "x"))}, "names an axis twice"),
    ({"a": ((0,), ("x",))}, "is empty"),
    ({"x": ((3, 2), ("x", "y"))}, "rename one of them"),
])  # fmt: skip
def test_quantities_that_do_not_fit_together_are_refused(tmp_path, arrays, words):
    made = {name: Quantity(np.zeros(shape), dims, "1", "") for name, (shape, dims) in arrays.items()}
    with pytest.raises(SizeMismatch, match=words):
        write(Stored("drift", made), tmp_path / "r.h5")
    assert list(tmp_path.iterdir()) == []


# what is not what it says


def refused(path: Path) -> str:
    with pytest.raises(StoreError) as caught:
        load(path)
    assert "\n" not in str(caught.value)
    assert str(path) in str(caught.value)
    return str(caught.value)


def test_a_missing_file_a_folder_and_other_files_are_each_told(tmp_path):
    assert "there is no file" in refused(tmp_path / "r.h5")
    assert "is a folder" in refused(tmp_path)
    for content in (b"", b"plain words", b"\x89HDF\r\n", bytes(5000)):
        (tmp_path / "r.h5").write_bytes(content)
        assert "is not an HDF5 file" in refused(tmp_path / "r.h5")


def test_a_file_whose_run_is_not_finished_is_told(tmp_path):
    (tmp_path / "r.h5.parts").mkdir()
    assert "unfinished run" in refused(tmp_path / "r.h5")


def test_another_program_s_hdf5_file_is_told(tmp_path):
    with h5py.File(tmp_path / "r.h5", "w") as file:
        file["x"] = [1, 2]
    assert "not a result of smallbody" in refused(tmp_path / "r.h5")


def test_a_newer_layout_is_told(tmp_path):
    with h5py.File(tmp_path / "r.h5", "w") as file:
        file.attrs["layout"], file.attrs["kind"] = 2, "drift"
    assert "layout 2, newer than 1" in refused(tmp_path / "r.h5")


def test_a_file_cut_short_anywhere_is_refused(tmp_path):
    whole = image(example())
    for length in np.linspace(0, len(whole) - 1, 97).astype(int):
        (tmp_path / "r.h5").write_bytes(whole[:length])
        if length < len(whole) - inside.SEAL_BYTES:
            refused(tmp_path / "r.h5")


def test_a_changed_byte_anywhere_is_refused(tmp_path):
    whole, rng = image(example()), np.random.default_rng(8)
    for at in rng.integers(0, len(whole) - inside.SEAL_BYTES, 300):
        changed = bytearray(whole)
        changed[at] ^= 1 << int(rng.integers(8))
        (tmp_path / "r.h5").write_bytes(changed)
        assert "damaged" in refused(tmp_path / "r.h5") or at < 8  # the first eight are what makes it HDF5


def test_a_file_that_another_program_changed_on_purpose_is_read(tmp_path):
    write(example(), tmp_path / "r.h5")
    with h5py.File(tmp_path / "r.h5", "a") as file:
        file.attrs["remark"] = "checked"
        file["facet_temperature_k"][0, 0] = 77.0
    back = load(tmp_path / "r.h5")
    assert back.attrs["remark"] == "checked"
    assert back.arrays["facet_temperature_k"].values[0, 0] == 77.0


def test_a_file_without_scales_is_refused(tmp_path):
    with h5py.File(tmp_path / "r.h5", "w") as file:
        file.attrs["layout"], file.attrs["kind"] = 1, "drift"
        file["x"] = [1, 2]
    assert "damaged" in refused(tmp_path / "r.h5")


SMALL_DISK = """
import resource, sys
resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[3]), int(sys.argv[3])))   # stands in for the full disk
sys.path.insert(0, sys.argv[1])
import test_store_hdf5 as t
t.inside.IN_MEMORY_BYTES = int(sys.argv[4])
try:
    t.write(t.example(), sys.argv[2])
    print("written")
except Exception as error:
    print(type(error).__name__, error)
"""


@pytest.mark.parametrize("room", [3000, 100_000])
@pytest.mark.parametrize("in_memory", [0, 10**9])
def test_a_full_disk_never_reaches_hdf5(tmp_path, room, in_memory):
    arguments = [Path(__file__).parent, tmp_path / "r.h5", room, in_memory]
    done = subprocess.run([sys.executable, "-c", SMALL_DISK, *map(str, arguments)], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    assert done.stdout.startswith(f"StoreError cannot write {tmp_path}/r.h5: File too large"), done
    assert list(tmp_path.iterdir()) == []
