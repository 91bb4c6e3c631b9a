"""What the tests of the command line share: a scenario that is good, and ways to run and to look."""

from pathlib import Path

from harmonic_planner import cli
from harmonic_planner.export import folder
from harmonic_planner.export.plan_json import plan_json

from plan_fixture import example_plan

GOOD = """\
title = "20 MHz to 120 MHz"
[source]
frequency = "20 MHz"
level = "10 dBm"
lines = { "2" = "-40 dBc", "3" = "-45 dBc" }
[output]
limit = "-45 dBc"
[design]
kit = "chip-1008"
[[stage]]
name = "tripler"
times = 3
device = { type = "push-pull", half_angle = "50 deg", balance = "25 dB", conversion = "-9 dB" }
pad = "6 dB"
pad_after = "6 dB"
[[stage]]
name = "doubler"
times = 2
device = { type = "push-push", half_angle = "70 deg", balance = "25 dB", conversion = "-9 dB" }
pad = "6 dB"
pad_after = "6 dB"
"""


def swap(old: str, new: str) -> str:
    """The good scenario with one thing changed, once."""
    assert old in GOOD
    return GOOD.replace(old, new, 1)


def drop(key: str) -> str:
    """The good scenario without the first line of a key."""
    lines = GOOD.splitlines(keepends=True)
    at = next(i for i, line in enumerate(lines) if line.startswith(f"{key} ="))
    return "".join(lines[:at] + lines[at + 1 :])


def snapshot(top: Path) -> dict[str, tuple[int, bytes]]:
    """Inode and content of every file below a folder."""
    return {str(p): (p.stat().st_ino, p.read_bytes()) for p in sorted(top.rglob("*")) if p.is_file()}


def write_earlier(out: Path) -> Path:
    """Make a result folder as an earlier run leaves it."""
    folder.write(out, {"plan.json": plan_json(example_plan(), ["plan.json", "lines.csv"]), "lines.csv": "a\n"})
    return out


def refused(capsys, arguments: list[str], status: int = 2) -> str:
    """Run, expect the status and one message on standard error, and return it."""
    assert cli.main(arguments) == status
    out, err = capsys.readouterr()
    assert out == ""
    assert "Traceback" not in err
    messages = err.splitlines()
    assert len(messages) == 1, err
    assert messages[0].startswith("error: ")
    return messages[0]
