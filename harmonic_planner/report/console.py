"""The console and the forms that everything on it takes: tables, sections, sentences behind a mark."""

from collections.abc import Iterable, Mapping, Sequence

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.report.text import printable

WIDTH = 80
STYLES: Mapping[str, str] = {"ok": "green", "marginal": "yellow", "swamped": "bold red", "no filter": "bold red"}


def console() -> Console:
    """Return a console on standard output; 80 columns and no colour where that is not a terminal."""
    probe = Console(highlight=False, markup=False, emoji=False)
    return (
        probe if probe.is_terminal else Console(width=WIDTH, highlight=False, markup=False, emoji=False, no_color=True)
    )


def verdict_line(screen: Console, sentence: str, *, good: bool) -> None:
    """Show the sentence that everything starts with."""
    screen.print(Text(printable(sentence), style="bold green" if good else "bold red"))


def table(*columns: str, right: Iterable[str] = (), fixed: Iterable[str] = (), gap: int = 2) -> Table:
    """Make an empty table with a rule under its heads; numbers stand to the right, fixed columns never wrap."""
    made = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, gap - 1, 0, 0), header_style="bold")
    aligned = set(right)
    unbroken = aligned | set(fixed)
    for column in columns:
        made.add_column(
            column, justify="right" if column in aligned else "left", overflow="fold", no_wrap=column in unbroken
        )
    return made


def heading(screen: Console, title: str) -> None:
    """Start a section."""
    screen.print()
    screen.print(Text(title, style="bold"))


def section(screen: Console, title: str, content: Table) -> None:
    """Show a table under its title."""
    heading(screen, title)
    screen.print(content if content.row_count else Text("none"))


def bullets(screen: Console, title: str, texts: Sequence[str]) -> None:
    """Show sentences, if any, one after the other under a title."""
    if not texts:
        return
    heading(screen, title)
    for text in texts:
        bullet(screen, Text(printable(text)))


def bullet(screen: Console, text: Text, mark: str = "-") -> None:
    """Show one sentence, indented behind a dash or another mark."""
    grid = Table.grid(padding=(0, 1, 0, 0))
    grid.add_row(mark, text)
    screen.print(grid)
