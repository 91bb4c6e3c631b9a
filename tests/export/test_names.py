"""File names from stage names."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.export.names import slug, stage_stem


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("first doubler", "first_doubler"),
        ("Étage n°2", "etage_n2"),
        ("../../etc", "etc"),
        ("日本", "stage"),
        ("", "stage"),
    ],
)
def test_slug_examples(name, expected):
    assert slug(name) == expected


@given(st.text())
def test_slug_is_always_a_plain_name(name):
    assert re.fullmatch(r"[a-z0-9_]{1,40}", slug(name))


def test_stages_of_one_name_get_two_names():
    assert stage_stem(1, "doubler") != stage_stem(2, "doubler")
