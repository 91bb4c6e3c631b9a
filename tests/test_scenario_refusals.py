"""Every bad scenario is refused in exact words, all its problems together."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scenario_documents import DEVICE, HERE, document, read
from scenario_refusals import EXPECTED, REFUSED

from harmonic_planner.model import PlannerError
from harmonic_planner.scenario import ScenarioError, loads


def problems(text):
    with pytest.raises(ScenarioError) as caught:
        loads(text, path=HERE)
    return list(caught.value.problems)


@pytest.mark.parametrize("case", REFUSED)
def test_refused_with_this_message(case):
    assert problems(REFUSED[case]) == EXPECTED[case]


def test_every_refused_case_has_its_message():
    assert REFUSED.keys() == EXPECTED.keys()


def test_all_problems_of_a_file_are_reported_together():
    text = document(
        source='frequency = "600 mhz"',
        output="",
        design='loss = "3"\nflatnes = "1 dB"',
        stage=f'name = "first"\ntimes = 0\n{DEVICE}\npad = "-3 dB"',
        more='[[stage]]\nname = "second"\ntimes = 3\ndevice = { type = "limiter", balance = "20 dB" }',
    )
    found = problems(text)
    assert [line.split(":")[0].split(" = ")[0] for line in found] == [
        "source.frequency",
        "design.loss",
        "design.flatnes",
        "stage[1].times",
        "stage[1].pad",
        "output.limit",
        "stage[2].device.conversion",
        "stage[2].device.balance",
    ]
    assert [line for line in found if '(stage "second")' in line] == found[-2:]


def test_message_names_the_file_on_every_line():
    with pytest.raises(PlannerError) as caught:
        loads(document(source="", output=""), path=Path("folder/chain.toml"))
    lines = str(caught.value).splitlines()
    assert len(lines) == 2
    assert all(line.startswith(f"{Path('folder/chain.toml')}: ") for line in lines)


JUNK = st.recursive(
    st.sampled_from(
        ['"600 MHz"', '"-3 dBc"', '""', '"\\u0007"', "3", "-1.5", "nan", "true", "1979-05-27", '"plan"', '"8 nH"']
    ),
    lambda inner: (
        st.lists(inner, max_size=3).map(lambda items: "[" + ", ".join(items) + "]")
        | st.dictionaries(st.sampled_from(["type", "2", "table", "[key]", "x y", "from"]), inner, max_size=3).map(
            lambda items: "{ " + ", ".join(f'"{k}" = {v}' for k, v in items.items()) + " }"
        )
    ),
    max_leaves=4,
)
PLACES = ["title", "source", "output", "design", "stage", "x", "source.frequency", "source.lines", "output.mask"]
PLACES += [
    "design.topology",
    "design.families",
    "design.kit",
    "design.order",
    "design.bandwidth",
    "stage.resonator",
    "stage.kit",
    "stage.device",
    "stage.filter",
    "stage.name",
    "table",
]


@settings(max_examples=150)
@given(place=st.sampled_from(PLACES), value=JUNK)
def test_any_value_anywhere_is_read_or_refused_in_one_line(place, value):
    """Property: no value makes anything but a scenario or problems of one line each."""
    table, _, key = place.partition(".")
    lines = {
        "source": 'frequency = "100 MHz"',
        "output": 'limit = "-60 dBc"',
        "stage": f"times = 2\n{DEVICE}",
    }
    if key:
        kept = [line for line in lines.get(table, "").splitlines() if not line.startswith(key)]
        lines[table] = "\n".join([*kept, f"{key} = {value}"])
        head = ""
    else:
        lines.pop(table, None)
        head = f"{table} = {value}\n"
    text = head + "".join(
        f"{'[[stage]]' if name == 'stage' else f'[{name}]'}\n{keys}\n" for name, keys in lines.items()
    )
    found: tuple[str, ...] = ("read",)
    try:
        read(text)
    except ScenarioError as error:
        found = error.problems
    assert found
    assert all(problem.isprintable() and len(problem) < 600 for problem in found)
