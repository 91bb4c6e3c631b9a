"""A proposal taken into a scenario: what is set, that the rest stays, and that the result is a scenario.

Every expectation is independent: the standard library's TOML reader, and the scenario reader on the new text.
"""

import tomllib
from dataclasses import replace
from pathlib import Path

import pytest
import tomlkit
from hypothesis import given, settings
from hypothesis import strategies as st
from scenario_documents import FULL, document, read

from harmonic_planner.applying import apply_proposal, changes, moved
from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.parts.kits import kit_names
from harmonic_planner.scenario import TEMPLATE, loads

from plan_fixture import doubler

(PLAIN,) = doubler().filter.proposals
PROPOSAL = replace(
    PLAIN, topology="capacitive", kit="chip-0805", impedance_ohm=75.0, resonator=8.2e-9, order=4, bandwidth_hz=23.8e6
)
SET = ("families", "ripple", "order", "bandwidth", "topology", "kit", "impedance", "resonator")

HEAD = """\
title = "kept"          # why

# The source
[source]
frequency = "100 MHz"
[output]
limit = "-60 dBc"
"""
CHAIN = (
    HEAD
    + """
# What all share
[design]
kit = "chip-1008"       # on the shelf
resonator = "10 nH"

# First stage
[[stage]]
name = "first"          # its name
times = 2
order   = 6             # for now
# no limit
#limit = "-20 dBc"

# its device
[stage.device]
type = "push-push"      # balanced
conversion = "-9 dB"
[stage.amplifier]
gain = "20 dB"

# Second stage
[[stage]]
  times = 3
  device.type = "push-pull"
  device.conversion = "-9 dB"   # measured

# Third stage
# with two lines of comment
[[stage]]
times = 1               # the end"""
)
ARRAY = (
    """\
stage = [
    # the doubler
    { times = 2, device = { type = "push-push", conversion = "-9 dB" }, order = 3 },   # first
    {times = 1}, # second
]
"""
    + HEAD
)


def comments(text: str) -> list[str]:
    """Comments of a text that has no # in its strings, in order."""
    return [line.partition("#")[2].rstrip() for line in text.splitlines() if "#" in line]


def test_the_stage_is_designed_to_what_the_proposal_says():
    design = read(apply_proposal(CHAIN, 0, PROPOSAL)).stages[0].design
    assert design.families == ("chebyshev",)
    assert (design.ripple_db, design.order, design.topology) == (0.1, 4, ("capacitive",))
    assert design.bandwidth == 0.2  # 23.8 of 119 MHz
    assert (design.kits, design.impedance_ohm) == (("chip-0805",), 75.0)
    assert (design.resonator_h, design.resonator_f) == (8.2e-9, None)


@pytest.mark.parametrize("text", [CHAIN, ARRAY], ids=["tables", "array"])
@pytest.mark.parametrize("index", [0, 1])
def test_nothing_else_changes(text, index):
    before, after = tomllib.loads(text), tomllib.loads(apply_proposal(text, index, PROPOSAL))
    set_keys = {key: after["stage"][index].pop(key) for key in SET}
    for key in SET:
        before["stage"][index].pop(key, None)
    assert after == before
    assert set_keys == {
        "families": ["chebyshev"],
        "ripple": "0.1 dB",
        "order": 4,
        "bandwidth": "20 %",
        "topology": "capacitive",
        "kit": "chip-0805",
        "impedance": "75 ohm",
        "resonator": "8.2 nH",
    }


@pytest.mark.parametrize("text", [CHAIN, ARRAY], ids=["tables", "array"])
@pytest.mark.parametrize("index", [0, 1])
def test_every_comment_stays_and_every_other_line_is_as_it_was(text, index):
    after = apply_proposal(text, index, PROPOSAL)
    assert comments(after) == comments(text)
    new = after.splitlines()
    lost = [line for line in text.splitlines() if line not in new]
    assert len(lost) <= 1  # the line of `order`, or of the stage where it is all on one line
    assert all("order" in line or "times" in line for line in lost)


def test_new_keys_stand_behind_the_last_key_of_the_stage_and_an_old_one_where_it_was():
    first = apply_proposal(CHAIN, 0, PROPOSAL).splitlines()
    at = first.index("order   = 4             # for now")
    assert [line.split(" = ")[0] for line in first[at + 1 : at + 8]] == [key for key in SET if key != "order"]
    assert first[at + 8 : at + 11] == ["# no limit", '#limit = "-20 dBc"', ""]
    second = apply_proposal(CHAIN, 1, PROPOSAL).splitlines()
    at = second.index('  device.conversion = "-9 dB"   # measured')
    assert second[at + 1 : at + 4] == ['  families = ["chebyshev"]', '  ripple = "0.1 dB"', "  order = 4"]
    assert second[at + 9 : at + 11] == ["", "# Third stage"]
    third = apply_proposal(CHAIN, 2, PROPOSAL).splitlines()
    assert third[third.index("times = 1               # the end") + 1] == 'families = ["chebyshev"]'


def test_line_ends_stay():
    windows = CHAIN.replace("\n", "\r\n")
    assert apply_proposal(windows, 1, PROPOSAL) == apply_proposal(CHAIN, 1, PROPOSAL).replace("\n", "\r\n")


@pytest.mark.parametrize("quoted", ['"order" = 6', "order = 6"])
def test_a_key_is_set_once_however_it_is_written(quoted):
    text = CHAIN.replace("order   = 6", quoted)
    assert tomllib.loads(apply_proposal(text, 0, PROPOSAL))["stage"][0]["order"] == 4


def test_tables_between_the_stages_are_written_together_with_their_comments():
    stages = CHAIN.split("# Second stage")
    text = stages[0].replace(HEAD, "") + "# in between\n" + HEAD.partition("\n")[2] + "# Second stage" + stages[1]
    after = apply_proposal(text, 1, PROPOSAL)
    assert sorted(comments(after)) == sorted(comments(text))
    assert read(after).stages[0] == read(text).stages[0]
    assert read(after).stages[1].design.order == 4


def test_butterworth_has_no_ripple():
    stage = tomllib.loads(apply_proposal(CHAIN, 1, replace(PROPOSAL, family="butterworth")))["stage"][1]
    assert "ripple" not in stage
    assert stage["families"] == ["butterworth"]


def test_impedance_is_left_out_where_it_holds_already():
    same = replace(PROPOSAL, impedance_ohm=50.0)
    assert "impedance" not in tomllib.loads(apply_proposal(CHAIN, 1, same))["stage"][1]
    own = CHAIN.replace("times = 3", 'times = 3\n  impedance = "100 ohm"')
    assert read(apply_proposal(own, 1, same)).stages[1].design.impedance_ohm == 50.0


def test_a_ladder_lifts_a_resonator_that_was_fixed():
    ladder = replace(PROPOSAL, topology="ladder-shunt", resonator=None)
    assert tomllib.loads(apply_proposal(CHAIN, 1, ladder))["stage"][1]["resonator"] == "auto"
    assert "resonator" not in tomllib.loads(apply_proposal(document(), 0, ladder))["stage"][0]


def test_the_free_element_of_inductive_coupling_is_a_capacitance():
    design = read(apply_proposal(CHAIN, 1, replace(PROPOSAL, topology="inductive", resonator=6e-12))).stages[1].design
    assert (design.resonator_h, design.resonator_f) == (None, 6e-12)


def test_a_bandwidth_is_never_rounded_up_nor_below_the_floor():
    third = replace(PROPOSAL, bandwidth_hz=1e6, centre_hz=6e6)
    taken = read(apply_proposal(document(), 0, third)).stages[0].design.bandwidth
    assert taken == pytest.approx(0.166666, rel=1e-12)
    text = document(design='min_bandwidth = "16.66666666 %"')
    assert read(apply_proposal(text, 0, third)).stages[0].design.bandwidth == pytest.approx(0.1666666666, rel=1e-12)
    exact = replace(PROPOSAL, bandwidth_hz=0.12 * 237.1e6, centre_hz=237.1e6)
    assert read(apply_proposal(document(), 0, exact)).stages[0].design.bandwidth == 0.12


def test_an_order_beyond_the_stages_most_takes_that_along():
    text = document(design="max_order = 3")
    assert read(apply_proposal(text, 0, PROPOSAL)).stages[0].design.max_order == 4
    assert "max_order" not in tomllib.loads(apply_proposal(document(), 0, PROPOSAL))["stage"][0]


@pytest.mark.parametrize("index", [-1, 3])
def test_a_stage_that_is_not_there(index):
    with pytest.raises(ValueError, match=f"no stage {index + 1}"):
        apply_proposal(CHAIN, index, PROPOSAL)


def test_changes_are_said_with_what_held_before():
    assert list(changes(CHAIN, apply_proposal(CHAIN, 0, PROPOSAL), 0)) == [
        'impedance = "75 ohm" (was "50 ohm")',
        'kit = "chip-0805" (was "chip-1008")',
        'families = ["chebyshev"] (was ["butterworth", "chebyshev"])',
        "order = 4 (was 6)",
        'bandwidth = "20 %" (was "auto")',
        'topology = "capacitive" (was "auto")',
        'resonator = "8.2 nH" (was "10 nH")',
    ]


# ---------------------------------------------------------------------------------------------------- any proposal


def proposed(share, centre_hz, **keys):
    return replace(PROPOSAL, bandwidth_hz=share * centre_hz, centre_hz=centre_hz, **keys)


PROPOSALS = st.builds(  # within limits of the texts that no proposal leaves: min_bandwidth 10 %, flatness 0.5 dB
    proposed,
    share=st.floats(0.1, 1.0),
    family=st.sampled_from(["butterworth", "chebyshev"]),
    ripple_db=st.sampled_from([0.01, 0.05, 0.1, 0.2]),
    order=st.integers(1, 9),
    topology=st.sampled_from(list(REGISTRY)),
    centre_hz=st.floats(10e6, 10e9),
    kit=st.sampled_from(kit_names()),
    impedance_ohm=st.sampled_from([25.0, 50.0, 75.0, 100.0, 112.5]),
    resonator=st.none() | st.floats(1e-10, 1e-6),
)
TEXTS = {"chain": CHAIN, "array": ARRAY, "template": TEMPLATE, "everything": FULL, "least": document()}


@pytest.mark.parametrize("name", TEXTS)
@settings(max_examples=25, deadline=None)
@given(proposal=PROPOSALS, data=st.data())
def test_any_proposal_makes_a_scenario_that_holds_it(name, proposal, data):
    """Property: the text is read, holds the proposal in that stage and leaves the others; taken twice it is one."""
    text = TEXTS[name]
    index = data.draw(st.integers(0, len(tomllib.loads(text)["stage"]) - 1))
    new = apply_proposal(text, index, proposal)
    before, after = read(text), read(new)
    design = after.stages[index].design
    share = proposal.bandwidth_hz / proposal.centre_hz
    assert design.families == (proposal.family,)
    assert design.bandwidth <= share * (1 + 1e-11)
    assert design.bandwidth == pytest.approx(share, rel=1.1e-5)
    assert (design.order, design.topology, design.kits) == (proposal.order, (proposal.topology,), (proposal.kit,))
    assert design.impedance_ohm == proposal.impedance_ohm
    free = REGISTRY[proposal.topology].free if proposal.resonator is not None else None
    assert design.resonator_h == (pytest.approx(proposal.resonator, rel=5.1e-6) if free == "L" else None)
    assert design.resonator_f == (pytest.approx(proposal.resonator, rel=5.1e-6) if free == "C" else None)
    assert [s for i, s in enumerate(after.stages) if i != index] == [
        s for i, s in enumerate(before.stages) if i != index
    ]
    assert (after.source, after.output, after.design) == (before.source, before.output, before.design)
    assert comments(new) == comments(text)
    assert apply_proposal(new, index, proposal) == new
    assert list(changes(new, new, index)) == []


# ---------------------------------------------------------------------------------------------------- other folders


@pytest.fixture
def own_kit(tmp_path) -> Path:
    """A folder with a kit file; another folder beside it."""
    (tmp_path / "chains" / "kits").mkdir(parents=True)
    (tmp_path / "elsewhere").mkdir()
    shipped = Path(apply_proposal.__code__.co_filename).parent / "parts" / "data" / "chip-1008.toml"
    (tmp_path / "chains" / "kits" / "own.toml").write_bytes(shipped.read_bytes())
    return tmp_path


def test_a_kit_file_is_found_from_another_folder_too(own_kit):
    text = CHAIN.replace('"chip-1008" ', '["chip-1008", "kits/own.toml"]').replace(
        "times = 3", 'times = 3\n  kit = "kits/own.toml" # mine'
    )
    loads(text, path=own_kit / "chains" / "a.toml")
    new = moved(text, from_folder=own_kit / "chains", to_folder=own_kit / "elsewhere")
    scenario = loads(new, path=own_kit / "elsewhere" / "a.toml")
    assert scenario.design.kits == ("chip-1008", "../chains/kits/own.toml")
    assert scenario.stages[1].design.kits == ("../chains/kits/own.toml",)
    assert comments(new) == comments(text)


def test_a_scenario_without_kit_files_is_moved_as_it_is(own_kit):
    for text in (CHAIN + "\n", ARRAY, TEMPLATE):
        assert moved(text, from_folder=own_kit / "chains", to_folder=own_kit / "elsewhere") == text


def test_an_absolute_kit_file_and_the_same_folder_change_nothing(own_kit):
    absolute = CHAIN.replace("chip-1008", (own_kit / "chains" / "kits" / "own.toml").as_posix()) + "\n"
    assert moved(absolute, from_folder=own_kit / "chains", to_folder=own_kit / "elsewhere") == absolute
    relative = CHAIN.replace("chip-1008", "kits/own.toml")
    assert (
        moved(relative, from_folder=own_kit / "chains", to_folder=own_kit / "elsewhere" / ".." / "chains") == relative
    )


def test_the_layouts_of_these_tests_are_what_they_say():
    assert isinstance(tomlkit.parse(CHAIN)["stage"], tomlkit.items.AoT)
    assert isinstance(tomlkit.parse(ARRAY)["stage"], tomlkit.items.Array)
    assert read(CHAIN).stages[0].design.order == 6
    assert read(ARRAY).stages[0].design.order == 3
