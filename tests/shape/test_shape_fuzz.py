"""A short run of the fuzzer; `python tests/shape/fuzz_readers.py --files 100000` is the long one."""

from __future__ import annotations

import pytest
from fuzz_readers import Tally, report, seeds, throw

from smallbody.errors import Note
from smallbody.shape import check_shape, parse_shape


def test_the_fuzzers_seeds_are_read_and_are_sound_but_for_the_one_with_a_ring():
    with pytest.warns(Note, match="1 polygon is not flat"):
        sound = [not any(f.serious for f in check_shape(parse_shape(data, f"x{suffix}"))) for suffix, data in seeds()]
    assert len(sound) > 20
    assert sum(sound) == len(sound) - 2  # a ring of twelve corners, and a facet there twice


def test_three_thousand_mutated_files_become_shapes_or_errors_of_one_line():
    tally = Tally()
    throw(3000, 20, tally)
    assert tally.wrong == [], report(tally)
    assert tally.files == 3000
    for kind in (".obj", ".tab", ".stl", ".ply", ".shape"):
        assert tally.accepted[kind] > 0
        assert tally.refused[kind] > 0
