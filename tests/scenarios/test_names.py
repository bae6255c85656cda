"""Names of features as names of files."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wellshed.scenarios.names import safe_file_name


@pytest.mark.parametrize(
    "name", ["../../etc/passwd", "a/b", "Mühle", "", "..", "con", "井", "x" * 500, "a\x00b", "C:\\x"]
)
def test_no_name_can_spell_a_path(name):
    assert re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9_-]{0,60}", safe_file_name(name))


@given(st.lists(st.text(), unique=True, max_size=20))
def test_names_stay_different_where_case_does_not_count(names):
    taken = []
    for name in names:
        taken.append(safe_file_name(name, taken))
    assert len({t.casefold() for t in taken}) == len(names)
    assert all(re.fullmatch(r"[A-Za-z0-9_-]+", t) for t in taken)


def test_letters_are_spelt_out():
    assert safe_file_name("Mühle Süd 1") == "Muehle_Sued_1"
