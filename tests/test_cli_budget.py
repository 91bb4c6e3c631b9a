"""The command `budget`: exit statuses, what it writes, and what it refuses."""

import json
import os
from pathlib import Path

import pytest
from cli_helpers import refused

from harmonic_planner import cli

SCENARIO = """\
title = "20 MHz to 40 MHz, as built"
[source]
frequency = "20 MHz"
lines = {{ "3" = "-40 dBc" }}
[output]
limit = "{limit}"
[design]
isolation = "none"
[[stage]]
name = "doubler"
times = 2
device = {{ type = "push-push", half_angle = "70 deg", conversion = "-9 dB" }}
pad = "6 dB"
pad_after = "6 dB"
filter = {filter}
"""
TABLE = "frequency,rejection\n" + "".join(
    f"{f},{a} dB\n"
    for f, a in (("10 MHz", 60), ("20 MHz", 50), ("38 MHz", 0), ("42 MHz", 0), ("60 MHz", 45), ("400 MHz", 70))
)
MEASURED = "line,level\n1,-48 dBc\n3,-50 dBc\n4,-46 dBc\n"


@pytest.fixture
def place(tmp_path: Path, monkeypatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "filter.csv").write_text(TABLE)
    (tmp_path / "lines.csv").write_text(MEASURED)
    write(tmp_path)
    return tmp_path


def write(folder: Path, *, limit: str = "-40 dBc", filter_words: str = '{ table = "filter.csv" }') -> None:
    (folder / "chain.toml").write_text(SCENARIO.format(limit=limit, filter=filter_words))


def test_it_shows_margins_and_drive_and_writes_nothing(place, capsys):
    before = sorted(os.listdir(place))
    assert cli.main(["budget", "chain.toml"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert out.startswith("Met: every line is within its limit; ")
    for words in ("Drive of every stage", "by the table filter.csv", "Output lines with the least margin"):
        assert words in out
    assert max(len(line) for line in out.splitlines()) <= 80
    assert sorted(os.listdir(place)) == before


def test_a_line_over_its_limit_is_status_three(place, capsys):
    write(place, limit="-70 dBc")
    assert cli.main(["budget", "chain.toml"]) == 3
    assert capsys.readouterr().out.startswith("Not met: line ")


def test_a_margin_below_what_plans_ask_for_is_met(place, capsys):
    cli.main(["budget", "chain.toml", "--out", "out"])
    lines = json.loads((place / "out" / "plan.json").read_text())["output"]["lines"]
    least = min(line["margin_db"] for line in lines if line["margin_db"] is not None)
    write(place, limit=f"{-40 - least + 1:.3f} dBc")
    assert cli.main(["budget", "chain.toml"]) == 0
    assert cli.main(["plan", "chain.toml", "--out", "planned"]) == 3
    capsys.readouterr()


def test_the_results_are_written_where_asked(place, capsys):
    assert cli.main(["budget", "chain.toml", "--measured", "lines.csv", "--out", "out"]) == 0
    out = capsys.readouterr().out
    assert f"wrote {len(os.listdir(place / 'out'))} files to out{os.sep}" in " ".join(out.split())
    plan = json.loads((place / "out" / "plan.json").read_text())
    assert set(os.listdir(place / "out")) == set(plan["files"])
    assert {"lines.csv", "requirements.csv", "01_doubler_response.png", "comparison.json"} <= set(plan["files"])
    assert plan["stages"][0]["filter"]["source"] == "table"
    assert plan["allocation"] is None
    comparison = json.loads((place / "out" / "comparison.json").read_text())
    assert [line["line"] for line in comparison["lines"]] == ["1", "3", "4"]
    assert comparison["explanations"][0]["text"]
    assert cli.main(["budget", "chain.toml", "--out", "out"]) == 0  # replaced, as an earlier run
    assert "comparison.json" not in os.listdir(place / "out")


@pytest.mark.usefixtures("place")
def test_measured_lines_stand_beside_computed_ones(capsys):
    assert cli.main(["budget", "chain.toml", "--measured", "lines.csv"]) == 0
    out = capsys.readouterr().out
    for words in ("Measured at the output, dBc", "What the measured lines say", "One change each", "random phases"):
        assert words in out
    assert max(len(line) for line in out.splitlines()) <= 80


@pytest.mark.parametrize("words", ['"plan"', '{ touchstone = "none.s2p" }', '{ table = "other.csv" }'])
def test_what_cannot_be_used_is_one_line_that_names_file_and_stage(place, capsys, words):
    write(place, filter_words=words)
    message = refused(capsys, ["budget", "chain.toml"])
    assert message.startswith("error: chain.toml: stage[1].filter")
    assert '(stage "doubler")' in message


def test_a_measured_file_that_cannot_be_used(place, capsys):
    (place / "lines.csv").write_text("line,level\n1,-48\n")
    message = refused(capsys, ["budget", "chain.toml", "--measured", "lines.csv"])
    assert message.startswith("error: --measured lines.csv: line 2: level = ")
    assert "there is no such file" in refused(capsys, ["budget", "chain.toml", "--measured", "none.csv"])


def test_a_folder_that_is_not_ours_is_refused_before_anything_is_computed(place, capsys, monkeypatch):
    from harmonic_planner.planning import hardware

    monkeypatch.setattr(hardware, "budget", lambda _: pytest.fail("computed"))
    (place / "mine").mkdir()
    (place / "mine" / "thesis.txt").write_text("x")
    assert "--out mine" in refused(capsys, ["budget", "chain.toml", "--out", "mine"])


def test_outside_its_sweep_a_filter_is_refused(place, capsys):
    (place / "filter.csv").write_text("\n".join(TABLE.splitlines()[:-2]) + "\n")
    message = refused(capsys, ["budget", "chain.toml"])
    assert 'stage[1].filter.table = "filter.csv": line ' in message
    assert "lies outside its frequencies, 10 to 42 MHz" in message
    write(place, filter_words='{ table = "filter.csv", beyond_sweep = "no-rejection" }')
    assert cli.main(["budget", "chain.toml"]) == 3
    capsys.readouterr()


def test_help_shows_an_example(capsys):
    assert cli.main(["budget", "--help"]) == 0
    text = capsys.readouterr().out
    assert f"{cli.PROGRAM} budget chain.toml --measured lines.csv" in text[text.index("Example:") :]
