"""plan.json: keys, values that JSON lacks, and the same bytes every time."""

import json
import math
from dataclasses import fields, replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.export.plan_json import layout, plain, plan_json
from harmonic_planner.model import Plan

from plan_fixture import example_plan

# The keys that programs rely on, typed in here so that a renamed field fails.
KEYS = {
    "": "schema verdict limits_met buildable self_check warnings assumptions output stages",
    "output": "carrier_dbm frequency_hz lines phase_noise",
    "output.lines.0": "line frequency_hz level_dbc allowance_db limit_dbc margin_db margin_other_phases_db origins",
    "output.lines.0.origins.0": "stage line share",
    "output.phase_noise.0": "offset_hz dbc_hz",
    "stages.0": "name times line frequency_hz drive_dbm output_dbm input_lines device_lines filter limit_dbc"
    " limited_lines",
    "stages.0.input_lines.0": "line level_dbc",
    "stages.0.filter": "source family ripple_db order topology centre_hz bandwidth_hz loss_db return_loss_db"
    " requirement windows elements proposals",
    "stages.0.filter.requirement.0": "line frequency_hz required_db ideal_db as_built_db margin_db",
    "stages.0.filter.windows.0": "family ripple_db order bandwidth_min_hz bandwidth_max_hz centre_hz feasible",
    "stages.0.filter.elements.0": "ref kind placement ideal nominal unit q self_resonance_hz stray_share verdict",
    "stages.1.filter.proposals.0": "change order topology bandwidth_hz worst_verdict worst_margin_db loss_db",
}


def written() -> dict:
    def refuse(name: str) -> None:
        raise AssertionError(f"{name} is not JSON")

    return json.loads(plan_json(example_plan()), parse_constant=refuse)


@pytest.mark.parametrize("path", KEYS)
def test_every_documented_key_is_there(path):
    node = written()
    for step in filter(None, path.split(".")):
        node = node[int(step)] if step.isdigit() else node[step]
    assert set(KEYS[path].split()) <= set(node)


def test_every_field_of_the_plan_is_there_in_order():
    assert list(written()) == [field.name for field in fields(Plan)] + ["files"]


def test_lines_are_text():
    assert [line["line"] for line in written()["source_lines"]] == ["1/2", "2"]


def test_numbers_keep_all_their_digits():
    plan = replace(example_plan(), title="digits")
    wanted = plan.stages[0].frequency_hz
    assert tuple(written()["stages"][0]["frequency_hz"]) == wanted


def test_an_infinite_rejection_is_null():
    needs = written()["stages"][1]["filter"]["requirement"]
    assert needs[2]["as_built_db"] is None
    assert needs[2]["margin_db"] is None


def test_the_same_plan_gives_the_same_text():
    assert plan_json(example_plan()) == plan_json(example_plan())


def test_files_are_listed_sorted():
    content = json.loads(plan_json(example_plan(), files=["plan.json", "a.csv"]))
    assert content["files"] == ["a.csv", "plan.json"]


def test_one_requirement_stands_on_one_line():
    text = plan_json(example_plan())
    row = next(line for line in text.splitlines() if '"required_db": 55.0' in line)
    assert row.strip().startswith("{")
    assert row.strip().rstrip(",").endswith("}")


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (np.float64(1.5), 1.5),
        (np.int64(3), 3),
        (math.nan, None),
        (-math.inf, None),
        (Fraction(1, 2), "1/2"),
        (True, True),
        ({Fraction(3): 1}, {"3": 1}),
    ],
)
def test_plain_values(value, expected):
    result = plain(value)
    assert result == expected
    assert type(result) is type(expected)


def test_an_unknown_type_is_refused():
    with pytest.raises(TypeError, match="set has no form"):
        plain({1, 2})


json_values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False, allow_infinity=False) | st.text(),
    lambda inner: st.lists(inner, max_size=5) | st.dictionaries(st.text(), inner, max_size=5),
    max_leaves=30,
)


@given(json_values)
def test_layout_is_json_of_the_same_value(value):
    assert json.loads(layout(value)) == value
