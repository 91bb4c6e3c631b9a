"""`plan --what-if`: the plan as without it, and what lies around it."""

import json
from pathlib import Path

import pytest
from cli_helpers import GOOD

from harmonic_planner import cli

PAD_AFTER = 'pad_after = "6 dB"\n'
CHAIN = (
    GOOD[: GOOD.rindex("[[stage]]")]  # its tripler alone
    .replace(PAD_AFTER, PAD_AFTER + 'amplifier = { gain = "20 dB" }\n')
    .replace('kit = "chip-1008"\n', 'kit = "chip-1008"\ntopology = "ladder"\n')
)


@pytest.fixture(scope="module")
def outcome(tmp_path_factory) -> tuple[Path, int]:
    place = tmp_path_factory.mktemp("what-if")
    scenario = place / "chain.toml"
    scenario.write_text(CHAIN, encoding="utf-8")
    return place, cli.main(["plan", str(scenario), "--out", str(place / "out"), "--what-if"])


def told(place: Path) -> dict:
    return json.loads((place / "out" / "plan.json").read_text(encoding="utf-8"))


def test_rows_trade_and_figure_are_in_the_folder(outcome):
    place, status = outcome
    plan = told(place)
    assert status in (0, 3)
    assert {"one resonator more", "one resonator fewer"} < {row["change"] for row in plan["what_if"]}
    assert len(plan["trade"]) == 3
    assert "trade.png" in plan["files"]
    assert (place / "out" / "trade.png").read_bytes().startswith(b"\x89PNG")


def test_without_the_flag_there_are_none(outcome):
    place, status = outcome
    around = told(place)
    assert cli.main(["plan", str(place / "chain.toml"), "--out", str(place / "out")]) == status
    alone = told(place)
    assert alone["what_if"] == alone["trade"] == []
    assert not (place / "out" / "trade.png").exists()
    for key in set(alone) - {"what_if", "trade", "files"}:
        assert alone[key] == around[key]
