"""Print a command from README.md: the first fenced block under a heading, so that it is written down only once."""

import re
import sys
from pathlib import Path

README = Path(__file__).resolve().parents[1] / "README.md"

_HEADING = re.compile(r" {0,3}(#{1,6})\s+(.*?)\s*#*\s*$")
_FENCE = re.compile(r"( {0,3})(`{3,}|~{3,})\s*([\w+-]*)\s*$")


def blocks(text: str) -> list[tuple[str, str]]:
    """Return heading and content of every fenced block, in order."""
    found: list[tuple[str, str]] = []
    heading, fence, lines = "", "", []
    for line in text.splitlines():
        opened = _FENCE.match(line)
        if fence:
            if opened and opened[2].startswith(fence) and not opened[3]:
                found.append((heading, "\n".join(lines)))
                fence = ""
            else:
                lines.append(re.sub(r"^\s*\$ ", "", line))
        elif opened:
            fence, lines = opened[2], []
        elif title := _HEADING.match(line):
            heading = title[2]
    if fence:
        raise ValueError(f"a fenced block under the heading {heading!r} never ends")
    return found


def command_under(text: str, heading: str) -> str:
    """Return the first fenced block under a heading, upper and lower case alike; raise ValueError without one."""
    for title, content in blocks(text):
        if title.casefold() == heading.casefold() and content.strip():
            return content
    raise ValueError(f"README.md has no fenced block under a heading {heading!r}")


if __name__ == "__main__":
    try:
        sys.stdout.write(command_under(README.read_text(encoding="utf-8"), sys.argv[1]) + "\n")
    except (OSError, ValueError) as fault:
        sys.exit(f"{Path(__file__).name}: {fault}")
