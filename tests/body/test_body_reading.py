"""Reading body files: every fault named by file, line, key, value and what is allowed, and nothing but BodyError."""

from __future__ import annotations

import math
import random
import re
import warnings

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from smallbody.body import read_body
from smallbody.errors import BodyError, Note

GOOD = """\
name = "example"      # invented

[shape]
file = "../shapes/example.obj"
length_unit = "km"

[bulk]
density_kg_m3 = 2000

[surface]
bond_albedo = 0.05
emissivity = 0.9
thermal_inertia = 200

[spin]
period_h = 6.0
obliquity_deg = 30.0
pole_azimuth_deg = 10.0

[orbit]
a_au = 1.2
e = 0.1
i_deg = 3.0

[solver]
lit_samples = 4
"""


SHAPE = 'file = "../shapes/example.obj"'
POLE = "obliquity_deg = 30.0\npole_azimuth_deg = 10.0"


@pytest.fixture
def write(tmp_path):
    def put(text, name="body.toml"):
        path = tmp_path / name
        path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
        return path

    return put


def fault(path, changes=()):
    with pytest.raises(BodyError) as error:
        read_body(path, changes)
    message = str(error.value)
    assert "\n" not in message
    assert message.startswith(str(path))
    return error.value.details.get("lines", [message])


def test_a_good_file_is_read_and_its_shape_is_looked_for_beside_it(write, tmp_path):
    body = read_body(write(GOOD))
    assert body.shape.file == (tmp_path.parent / "shapes" / "example.obj")
    assert (body.bulk.density_kg_m3, body.spin.obliquity_deg, body.orbit.i_deg) == (2000.0, 30.0, 3.0)
    assert body.solver.rotation_nodes == 64


def test_dos_line_ends_and_a_byte_order_mark_do_no_harm(write):
    dos = write(b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode())
    assert read_body(dos) == read_body(write(GOOD, "unix.toml"))
    assert fault(write("\ufeff" + GOOD.replace("e = 0.1", "e = 2").replace("\n", "\r\n"))) == [
        f"{dos}, line 22: orbit.e = 2 must be a number from 0 to below 0.98: an open orbit has no mean rate"
    ]


@pytest.mark.parametrize(
    ("old", "new", "line", "said"),
    [
        ("period_h = 6.0", "period_h = -6.0", 16, "period_h = -6.0 must be a number from 1e-06 to 1000000 (hours)"),
        ("period_h = 6.0", "period_h = 0", 16, "spin.period_h = 0 must be a number"),
        ("period_h = 6.0", "period_h = nan", 16, "spin.period_h = nan must be a number"),
        ("period_h = 6.0", "period_h = -inf", 16, "spin.period_h = -inf must be a number"),
        ("period_h = 6.0", "period_h = true", 16, "spin.period_h = true must be a number"),
        ("period_h = 6.0", 'period_h = "6.0"', 16, 'spin.period_h = "6.0" must be a number'),
        ("period_h = 6.0", "period_h = [6.0]", 16, "spin.period_h = [6.0] must be a number"),
        ("period_h = 6.0", "period_h = 2001-01-01", 16, "spin.period_h = 2001-01-01 must be a number"),
        ("period_h = 6.0", "period_h = {a = 1}", 16, "spin.period_h = a table must be a number"),
        ("period_h = 6.0", "", 15, "spin.period_h is missing: a number from 1e-06 to 1000000 (hours)"),
        ("period_h", "perod_h", 16, "spin.perod_h is not a key: did you mean period_h?"),
        (
            "obliquity_deg",
            "colour = 1\nobliquity_deg",
            17,
            "spin.colour is not a key: known here: period_h, obliquity_deg",
        ),
        ("bond_albedo = 0.05", "bond_albedo = 1.01", 11, "surface.bond_albedo = 1.01 must be a number from 0 to 1"),
        ("emissivity = 0.9", "emissivity = 0.0", 12, "surface.emissivity = 0.0 must be a number above 0 and at most 1"),
        ("= 200\n", "= -0.1\n", 13, "must be a number from 0 to 10000 (J m-2 K-1 s-1/2)"),
        ("obliquity_deg = 30.0", "obliquity_deg = 181", 17, "must be a number from 0 to 180 (degrees)"),
        ("e = 0.1", "e = 1", 22, "orbit.e = 1 must be a number from 0 to below 0.98: an open orbit has no mean rate"),
        ("e = 0.1", "e = 0.98", 22, "orbit.e = 0.98 must be a number from 0 to below 0.98: so close to open,"),
        ("e = 0.1", "e = -0.1", 22, "orbit.e = -0.1 must be a number from 0 to below 0.98"),
        ("a_au = 1.2", "a_au = 0", 21, "orbit.a_au = 0 must be a number from 0.001 to 100000 (au)"),
        ("density_kg_m3 = 2000", "density_kg_m3 = 0.0", 8, "bulk.density_kg_m3 = 0.0 must be a number"),
        ("density_kg_m3 = 2000", "", 7, "in [bulk], the mass is missing: give one of density_kg_m3 or mass_kg"),
        (
            "density_kg_m3 = 2000",
            "density_kg_m3 = 2000\nmass_kg = 1",
            9,
            "given twice, by density_kg_m3 and by mass_kg",
        ),
        ("obliquity_deg = 30.0", "", 18, "obliquity_deg is missing: pole_azimuth_deg alone does not give the pole"),
        ("obliquity_deg = 30.0", "pole_ecliptic_deg = [0, 9]", 18, "pole_azimuth_deg goes with obliquity_deg"),
        ("pole_azimuth_deg = 10.0", "pole_ecliptic_deg = [0, 9]", 18, "the pole is given twice"),
        (POLE, "pole_ecliptic_deg = [0]", 17, "spin.pole_ecliptic_deg = [0] must be a list of 2"),
        ('length_unit = "km"', 'length_unit = "miles"', 5, 'shape.length_unit = "miles" must be "km" or "m"'),
        ('length_unit = "km"', "sphere_facets = 80\ndiameter_km = 1", 5, "given twice, by file and by sphere_facets"),
        ('length_unit = "km"', "facets = 80", 5, "facets goes with ellipsoid_axes only"),
        (SHAPE, "", 3, "the shape is missing: give one of file, sphere_facets or ellipsoid_axes"),
        (SHAPE, "sphere_facets = 80", 4, "diameter_km is missing: a sphere has no other size"),
        (SHAPE, "ellipsoid_axes = [1, 2, 3]", 4, "facets is missing: an ellipsoid needs it"),
        (SHAPE, "ellipsoid_axes = [1, 2]\nfacets = 80", 4, "axes = [1, 2] must be a list of 3"),
        (SHAPE, 'file = ""', 4, 'shape.file = "" must be a path as text'),
        (SHAPE, "file = 3", 4, "shape.file = 3 must be a path as text"),
        ("lit_samples = 4", "lit_samples = 2", 26, "solver.lit_samples = 2 must be 1, 4 or 16"),
        ("lit_samples = 4", "lit_samples = true", 26, "solver.lit_samples = true must be 1, 4 or 16"),
        ("lit_samples = 4", "rotation_nodes = 63", 26, "= 63 must be an even whole number from 16 to 1024"),
        ("lit_samples = 4", "shadows = 1", 26, "solver.shadows = 1 must be true or false"),
        ("lit_samples = 4", 'method = "fast"', 26, 'solver.method = "fast" must be "lag" or "march"'),
        ("[solver]", "[solvr]", 25, "[solvr] is not a section: did you mean [solver]?"),
        ('name = "example"', "", 0, "name is missing"),
        ('name = "example"', 'name = ""', 1, 'name = "" must be text of one line'),
        ('name = "example"', 'name = "two\\nlines"', 1, "must be text of one line"),
        ('name = "example"', 'name = "x"\nperiod_h = 3', 2, "period_h is not a key: it belongs in [spin]"),
        ("[surface]\n", "[surface]\nperiod_h = 3\n", 11, "surface.period_h is not a key: it belongs in [spin]"),
    ],
)
def test_each_fault_is_named_with_its_line_key_value_and_range(write, old, new, line, said):
    assert GOOD.count(old) >= 1
    path = write(GOOD.replace(old, new, 1))
    lines = fault(path)
    assert len(lines) == 1
    assert lines[0].startswith(f"{path}, line {line}: " if line else f"{path}: ")
    assert said in lines[0]


def test_several_faults_are_all_named_in_the_order_of_their_lines(write):
    text = (
        GOOD.replace("2000", "-1")
        .replace("period_h", "perod_h")
        .replace("e = 0.1", "e = 3")
        .replace("[solver]", "[slver]")
    )
    path = write(text)
    lines = fault(path)
    assert [re.search(r"line (\d+)", line)[1] for line in lines] == ["8", "16", "22", "25"]
    with pytest.raises(BodyError) as error:
        read_body(path)
    assert str(error.value).count("body.toml") == 1
    assert str(error.value).count("; line ") == 3


def test_a_section_that_is_missing_says_what_it_needs(write):
    lines = fault(write('name = "x"\n'))
    assert [line.rpartition("toml: ")[2] for line in lines] == [
        "section [shape] is missing: it needs one of file, sphere_facets or ellipsoid_axes",
        "section [bulk] is missing: it needs one of density_kg_m3 or mass_kg",
        "section [surface] is missing: it needs bond_albedo, emissivity, thermal_inertia",
        "section [spin] is missing: it needs period_h, one of obliquity_deg or pole_ecliptic_deg",
        "section [orbit] is missing: it needs a_au, e",
    ]


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "the body file is empty"),
        (" \n\n", "the body file is empty"),
        ('name = "x"\n[spin\n', ", line 2: not valid TOML"),
        ("name = example\n", ", line 1: not valid TOML: Invalid value (text stands in quotes)"),
        ('name = "a"\nname = "b"\n', ", line 2: not valid TOML"),
        ('name = "a', ", line 1: not valid TOML"),
        ('\nname = """a', ", line 2: not valid TOML"),
        (b"name = '\xff'\n", ", line 1: not text in UTF-8"),
        (b"\x00\x01\x02", ", line 1: not valid TOML"),
        ("a = " + "[" * 5000, "brackets nested too deep"),
        ("a = " + "9" * 5000, "a number of thousands of digits"),
        ("#" * 300_000, "larger than 262144 bytes, which is no body file"),
    ],
)
def test_what_is_no_toml_is_told_so(write, text, said):
    path = write(text)
    assert said in fault(path)[0]


def test_a_file_that_is_not_there_or_is_a_folder_cannot_be_read(tmp_path):
    assert fault(tmp_path / "none.toml")[0].endswith("cannot read the body file: No such file or directory")
    assert "cannot read the body file" in fault(tmp_path)[0]


def test_a_key_is_found_in_dotted_and_inline_form_and_not_inside_a_text(write):
    text = 'name = """\nperiod_h = 3\n[spin]\n"""\n' + GOOD.partition("\n")[2]
    assert "name" in fault(write(text))[0]
    inline = GOOD.replace("[spin]\nperiod_h = 6.0\nobliquity_deg = 30.0\npole_azimuth_deg = 10.0\n", "")
    inline = "spin = {period_h = -1, obliquity_deg = 3}\n" + inline
    assert ", line 1: spin.period_h = -1" in fault(write(inline))[0]
    dotted = inline.replace("spin = {period_h = -1, obliquity_deg = 3}", "\nspin.obliquity_deg = 3\nspin.period_h = -1")
    assert ", line 3: spin.period_h = -1" in fault(write(dotted))[0]


# --- changes ----------------------------------------------------------------------------------------------------
def test_changes_are_read_as_toml_and_bare_words_as_text(write):
    path = write(GOOD)
    body = read_body(
        path, ["surface.thermal_inertia=50", "shape.length_unit = m", 'name="other name"', "solver.shadows=false"]
    )
    assert (body.surface.thermal_inertia, body.shape.length_unit, body.name) == (50.0, "m", "other name")
    assert body.solver.shadows is False
    assert (
        read_body(path, ["spin.pole_ecliptic_deg=[10, 20]", "orbit.node_deg=1", "orbit.peri_deg=2"]).spin.obliquity_deg
        is None
    )


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ("spin.period_h=-1", ", as changed: spin.period_h = -1 must be"),
        ("spin.period_h=", ', as changed: spin.period_h = "" must be'),
        ("spin.period_h=1\nx=2", ', as changed: spin.period_h = "1\\nx=2" must be'),
        ("spin.perod_h=1", ", as changed: spin.perod_h is not a key: did you mean period_h?"),
        ("bulk.mass_kg=" + "9" * 5000, ", as changed: bulk.mass_kg ="),
    ],
)
def test_a_wrong_change_is_told_from_a_wrong_line(write, change, said):
    assert said in fault(write(GOOD), [change])[0]


def test_a_change_without_an_equals_sign_is_refused(write):
    with pytest.raises(BodyError, match=r'change "spin" must look like section\.key=value'):
        read_body(write(GOOD), ["spin"])


# --- notes ------------------------------------------------------------------------------------------------------
def notes(path):
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        read_body(path)
    assert all(issubclass(one.category, Note) for one in caught)
    return [str(one.message) for one in caught]


def test_a_good_file_earns_no_notes(write):
    assert notes(write(GOOD)) == []


def test_a_density_in_the_wrong_unit_a_sungrazer_and_a_pole_without_orbit_earn_notes(write):
    assert "2 g/cm3 would be 2000" in notes(write(GOOD.replace("2000", "2")))[0]
    assert "inside the Sun" in notes(write(GOOD.replace("a_au = 1.2", "a_au = 0.004")))[0]
    pole = GOOD.replace("obliquity_deg = 30.0\npole_azimuth_deg = 10.0", "pole_ecliptic_deg = [0, 80]")
    assert "node_deg, peri_deg of [orbit] taken as 0" in notes(write(pole))[0]


# --- fuzzing ----------------------------------------------------------------------------------------------------
def only_body_errors(path, changes=()):
    """True if it was readable; any error but BodyError, or one of several lines, fails the test."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", Note)
        try:
            body = read_body(path, changes)
        except BodyError as error:
            message = str(error)
        else:
            message = ""
    if message:
        assert message.isprintable()
        return False
    assert all(math.isfinite(x) for x in (body.obliquity, body.pole_azimuth, body.rotations_per_orbit))
    return True


def mutated(text: bytes, dice: random.Random) -> bytes:
    data = bytearray(text)
    for _ in range(dice.choice([1, 1, 1, 2, 3, 8])):
        at, much = dice.randrange(len(data) + 1), dice.choice([1, 1, 2, 5, 30])
        match dice.randrange(7):
            case 0:
                del data[at : at + much]
            case 1:
                data[at:at] = dice.choice(
                    [b"[", b"]", b'"', b"'", b"=", b"\n", b".", b"#", b"-", b"nan", b"inf", b"1e999", b"\\u12"]
                )
            case 2:
                data[at:at] = bytes(dice.randrange(256) for _ in range(much))
            case 3:
                source = dice.randrange(len(data) + 1)
                data[at:at] = data[source : source + much * 3]
            case 4 if len(data) > 1:
                data[min(at, len(data) - 1)] ^= 1 << dice.randrange(8)
            case 5:
                del data[at:]
            case 6:
                lines = data.split(b"\n")
                dice.shuffle(lines)
                data = bytearray(b"\n".join(lines))
    return bytes(data)


@pytest.mark.parametrize("count", [4_000, pytest.param(100_000, marks=pytest.mark.slow)])
def test_mutated_files_give_bodies_or_body_errors(tmp_path, count):
    dice = random.Random(20)
    path = tmp_path / "mutated.toml"
    readable = 0
    for _ in range(count):
        path.write_bytes(mutated(GOOD.encode(), dice))
        readable += only_body_errors(path)
    assert 0.02 * count < readable < 0.6 * count  # the mutations are neither all fatal nor all harmless


plain = st.one_of(
    st.booleans(),
    st.integers(),
    st.floats(),
    st.text(max_size=20),
    st.dates(),
    st.datetimes(),
    st.none().map(lambda _: "bare"),
)
values = st.recursive(plain, lambda inner: st.lists(inner, max_size=4), max_leaves=6)


def as_toml(value):
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return '"' + "".join(c if c.isalnum() and ord(c) < 128 else f"\\U{ord(c):08x}" for c in value) + '"'
    if isinstance(value, list):
        return "[" + ", ".join(map(as_toml, value)) + "]"
    return value.isoformat() if hasattr(value, "isoformat") else repr(value)


KEYS = sorted(re.findall(r"^(\w+) =", GOOD, re.MULTILINE))


@settings(max_examples=600, deadline=None)
@given(st.sampled_from(KEYS), values, st.text(max_size=12))
def test_any_value_and_any_name_of_a_key_give_a_body_or_a_body_error(tmp_path_factory, key, value, name):
    path = tmp_path_factory.getbasetemp() / "any.toml"
    path.write_text(
        re.sub(rf"^{key} = .*$", lambda _: f"{key} = {as_toml(value)}", GOOD, flags=re.MULTILINE), encoding="utf-8"
    )
    only_body_errors(path)
    path.write_text(GOOD.replace(key, as_toml(name), 1), encoding="utf-8")
    only_body_errors(path)
    path.write_text(GOOD, encoding="utf-8")
    only_body_errors(path, [f"{name}={name}", f"spin.{name}={as_toml(value)}"])
    only_body_errors(path, [f"orbit.{KEYS[0]}={name}"])
