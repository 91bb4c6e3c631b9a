"""The command `window`: one filter from options alone, nothing read and nothing written."""

import json
import os
import re
from pathlib import Path

import pytest
from cli_helpers import refused, snapshot

from harmonic_planner import cli

ASKED = ["--carrier", "240 MHz", "--line", "120 MHz, 45 dB", "--line", "359 MHz..361 MHz, 40 dB"]
KITS = Path(cli.__file__).parent / "parts" / "data"


@pytest.fixture
def place(tmp_path, monkeypatch) -> Path:
    """An empty current folder."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


def answered(capsys, *options: str, status: int = 0) -> str:
    """Run the command, expect the status and nothing on standard error, and return what it says."""
    assert cli.main(["window", *options]) == status
    out, err = capsys.readouterr()
    assert err == ""
    assert max(map(len, out.splitlines())) <= 80
    assert "\x1b" not in out
    return out


def rejections(text: str) -> dict[str, tuple[float, float, float]]:
    """Line -> required, as built, margin."""
    rows = re.findall(r"^(\S+ .Hz) +(\S+) +(\S+) +([+-]\S+)$", text, re.MULTILINE)
    return {line: (float(required), float(built), float(margin)) for line, required, built, margin in rows}


def test_a_real_filter_is_chosen_and_what_it_does_is_shown(place, capsys):
    text = answered(capsys, *ASKED)
    found = rejections(text)
    assert {line: required for line, (required, _, _) in found.items()} == {"120 MHz": 45.0, "359–361 MHz": 40.0}
    assert all(margin >= 0 and built >= required for required, built, margin in found.values())
    assert "of chip-0603" in text
    assert re.search(r"^(L|C)1 +(series|shunt) +\S+ (nH|pF)", text, re.MULTILINE)
    assert os.listdir(place) == []


def test_the_example_of_the_help_does_what_it_says(place, capsys):
    assert cli.main(["window", "--help"]) == 0
    text = capsys.readouterr().out
    example = text[text.index("Example:") :].partition("\n")[2].replace("\\\n", " ")
    program, command, *words = [word.strip('"') for word in re.findall(r'"[^"]*"|\S+', example)]
    assert (program, command) == (cli.PROGRAM, "window")
    assert "of chip-0805" in answered(capsys, *words)
    assert os.listdir(place) == []


def test_what_is_fixed_holds(place, capsys):
    (place / "mine.toml").write_bytes((KITS / "air-wound.toml").read_bytes())
    before = snapshot(place)
    fixed = ["--kit", "mine.toml", "--topology", "capacitive", "--family", "butterworth", "--order", "5"]
    text = answered(capsys, *ASKED, *fixed, "--resonator", "12 nH", "--loss", "3 dB", "--flatness", "1.5 dB")
    assert text.startswith("Butter 5 capacitive with 12 nH of air-wound")
    assert "Cheb" not in text
    assert snapshot(place) == before


@pytest.mark.usefixtures("place")
def test_what_cannot_be_done_is_status_3_and_says_why(capsys):
    close = answered(capsys, "--carrier", "239 MHz..241 MHz", "--line", "236 MHz, 45 dB", status=3)
    assert close.startswith("No filter does it: ")
    assert "236 MHz" in close
    leak = answered(capsys, "--carrier", "240 MHz", "--line", "120 MHz, 80 dB", "--isolation", "75 dB", status=3)
    assert "a shield is needed, not a resonator" in " ".join(leak.split())


@pytest.mark.usefixtures("place")
def test_a_filter_whose_parts_are_swamped_is_status_3(monkeypatch, capsys):
    from dataclasses import replace

    from harmonic_planner.planning import bench

    real = bench.answer

    def swamped(*arguments):
        found = real(*arguments)
        assert found.built is not None
        first, *others = found.built.elements
        spoilt = replace(found.built, elements=(replace(first, verdict="swamped", reason="strays 41 %"), *others))
        return replace(found, built=spoilt)

    monkeypatch.setattr(bench, "answer", swamped)
    text = answered(capsys, *ASKED, status=3)
    assert "parts swamped" in " ".join(text.split())
    assert "swamped: strays 41 %" in text


@pytest.mark.parametrize(
    ("options", "names"),
    [
        ([], ["--carrier"]),
        (["--carrier", "240 MHz"], ["--line"]),
        ([*ASKED, "--order", "two"], ["--order"]),
        ([*ASKED, "--nonsense"], ["--nonsense"]),
        ([*ASKED, "file.toml"], ["file.toml"]),
        (["--carrier", "240 mhz", *ASKED[2:]], ["--carrier", "240 mhz", "600 MHz"]),
        ([*ASKED, "--line", "120 MHz"], ["--line", "120 MHz", "the rejection"]),
        ([*ASKED, "--kit", "gone.toml"], ["--kit", "gone.toml", "chip-0603"]),
        ([*ASKED, "--flatness", "1"], ["--flatness", "1", "the unit is missing"]),
    ],
)
def test_bad_options_are_refused_with_one_message(options, names, place, capsys):
    message = refused(capsys, ["window", *options])
    assert [name for name in names if name not in message] == []
    assert os.listdir(place) == []


@pytest.mark.usefixtures("place")
def test_all_problems_are_told_together_a_line_each(capsys):
    assert cli.main(["window", "--carrier", "240", "--line", "x", "--order", "12"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert [message.split()[1] for message in err.splitlines()] == ["--carrier", "--line", "--order"]


@pytest.mark.usefixtures("place")
def test_the_same_options_give_the_same_answer(capsys):
    assert answered(capsys, *ASKED) == answered(capsys, *ASKED)


def test_options_and_scenario_give_the_same_message(place, capsys):
    from cli_helpers import GOOD

    (place / "bad.toml").write_text(GOOD.replace("[design]", '[design]\nflatness = "1 db"'))
    scenario = refused(capsys, ["plan", "bad.toml"])
    option = refused(capsys, ["window", *ASKED, "--flatness", "1 db"])
    assert scenario.partition(json.dumps("1 db"))[2] == option.partition(json.dumps("1 db"))[2]
