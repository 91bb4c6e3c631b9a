"""README against the program: its commands are where people and machines look for them, its options exist."""

import importlib.util
import re
from pathlib import Path

import pytest

from harmonic_planner import cli

ROOT = Path(__file__).parents[1]
COMMANDS = ("plan", "lines", "window", "budget", "schema", "new", "apply")


def load_extractor():
    """The script with which the test run takes its command from README."""
    spec = importlib.util.spec_from_file_location("readme_command", ROOT / ".ci" / "readme_command.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


extractor = load_extractor()


@pytest.fixture(scope="module")
def readme() -> str:
    return (ROOT / "README.md").read_text(encoding="utf-8")


def invocations(text: str) -> list[list[str]]:
    """Words after the program's name wherever a fenced block or inline code calls it."""
    calls = []
    code = [content for _, content in extractor.blocks(text)] + re.findall(r"`([^`\n]+)`", text)
    for content in code:
        for line in re.sub(r"\\\n\s*", " ", content).splitlines():
            for command in re.split(r"&&|\|\||[;|]", line.split(" #")[0]):
                words = command.split()
                at = next((i for i, word in enumerate(words) if word.split("/")[-1] == cli.PROGRAM), None)
                if at == 0:
                    calls.append(words[1:])
    return calls


def test_the_test_command_does_everything_that_is_checked(readme):
    command = extractor.command_under(readme, "Test")
    for part in ("-m venv .venv", ".[test]", "ruff check", "mypy", "pytest"):
        assert part in command


def test_another_command_installs_and_plans_the_shipped_scenario(readme):
    others = [content for heading, content in extractor.blocks(readme) if heading.casefold() != "test"]
    assert any("-m venv" in content and re.search(rf"{cli.PROGRAM} plan\b", content) for content in others)


def test_readme_shows_every_command_and_only_commands_that_exist(readme):
    named = {words[0] for words in invocations(readme) if words and not words[0].startswith("-")}
    assert "plan" in named
    assert named <= set(COMMANDS)
    for command in COMMANDS:
        assert re.search(rf"`[^`]*\b{command}\b", readme) or command in named


def test_every_option_that_readme_names_is_in_that_commands_help(readme, capsys):
    for words in invocations(readme):
        options = {word.split("=")[0] for word in words if re.match(r"--?[a-z]", word)}
        command = [words[0]] if words and words[0] in COMMANDS else []
        assert cli.main([*command, "--help"]) == 0
        text = capsys.readouterr().out
        assert [option for option in sorted(options) if option not in text] == []


def test_readme_gives_every_exit_status(readme):
    for status in ("0", "1", "2", "3"):
        assert re.search(rf"\b{status}\b", readme)


def test_blocks_are_found_under_their_own_heading_and_prompts_are_taken_off():
    text = (
        "# A\n```sh\n$ one\n# no heading\n```\n"
        "## Test ##\nwords\n~~~\ntwo &&\\\n  three\n```\n~~~\n"
        "### Test\n```\n```\n"
    )
    assert extractor.blocks(text) == [("A", "one\n# no heading"), ("Test", "two &&\\\n  three\n```"), ("Test", "")]
    assert extractor.command_under(text, "test") == "two &&\\\n  three\n```"


@pytest.mark.parametrize("text", ["", "## Test\nno block\n## Other\n```\nx\n```\n", "## Test\n```\nnever ends\n"])
def test_a_missing_command_is_an_error(text):
    with pytest.raises(ValueError, match=r"no fenced block|never ends"):
        extractor.command_under(text, "Test")
