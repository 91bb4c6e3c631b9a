"""The command ``harmonic-planner``: parse, call, show.

Exit statuses: 0 the limits are met, every filter can be built and the self-check passed; 3 planned, but one of these is
not so; 2 the input cannot be used; 1 the run failed for another reason; 130 and 143 stopped by SIGINT and SIGTERM.

Modules that take long to import (numpy, matplotlib, pydantic and what needs them) are imported inside the commands, so
that help comes at once.
"""

import io
import os
import signal
import sys
import traceback
from collections.abc import Callable, Sequence
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from harmonic_planner import __version__
from harmonic_planner.export import folder, new_file
from harmonic_planner.export.folder import OutputWriteError
from harmonic_planner.export.proposals import numbered_proposals
from harmonic_planner.model import PlannerError, Scenario
from harmonic_planner.shipped import SHIPPED, shipped_scenario
from harmonic_planner.stopping import StoppedError, stopping_on_signals

if TYPE_CHECKING:
    from harmonic_planner.planning.plan import WorkedOut

PROGRAM = "harmonic-planner"
DEBUG = "HARMONIC_PLANNER_DEBUG"


def _example(*commands: str) -> str:
    """Lay out example commands for the end of a help page, which keeps their lines apart."""
    return "\b\nExample:\n" + "\n".join(f"  {PROGRAM} {command}" for command in commands)


def _choice(metavar: str, meaning: str) -> Any:
    """Declare an option of `window` that may be left out."""
    return typer.Option(metavar=metavar, show_default=False, help=meaning)


app = typer.Typer(
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
)


def _show_version(wanted: bool) -> None:
    """Print the version and stop, when asked."""
    if wanted:
        typer.echo(f"{PROGRAM} {__version__}")
        raise typer.Exit


@app.callback(invoke_without_command=True, epilog=_example("new chain.toml", "plan chain.toml --out chain-plan"))
def overview(
    context: typer.Context,
    version: Annotated[  # noqa: ARG001 - its callback does the work
        bool, typer.Option("--version", callback=_show_version, is_eager=True, help="Show the version and exit.")
    ] = False,
) -> None:
    """Plan a frequency-multiplier chain: what every stage's filter must reject, and which filter can do it."""
    if context.invoked_subcommand is None:
        typer.echo(context.get_help())
        raise typer.Exit(2)


@app.command(epilog=_example("plan chain.toml --out chain-plan", "plan chain.toml --what-if"))
def plan(
    scenario: Annotated[
        Path | None,
        typer.Argument(
            metavar="SCENARIO", show_default=False, help=f"Scenario file (TOML). Without it: the shipped {SHIPPED}."
        ),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            metavar="DIR",
            show_default=False,
            help="Folder for the results: new, empty, or from an earlier run, which is replaced. "
            "Default: the scenario's name with -plan, in the current folder.",
        ),
    ] = None,
    what_if: Annotated[
        bool,
        typer.Option(
            "--what-if",
            help="Also search what pads, balance, shields, a source filter or a resonator more or fewer would change, "
            "and how wide the filters may be for more resonators. Takes seconds longer.",
        ),
    ] = False,
) -> int:
    """Plan a chain and write the plan, its tables and its figures.

    Exit status 0: limits met, every filter buildable, self-check passed. 3: planned, but one of these is not so.
    """
    path = shipped_scenario() if scenario is None else scenario
    target = Path(f"{path.stem}-plan") if out is None else out
    worked = _planned(path, before_planning=lambda: folder.check(target), what_if=what_if)
    result = worked.plan

    from harmonic_planner.report import terminal
    from harmonic_planner.report.console import console
    from harmonic_planner.report.files import plan_files

    files = plan_files(worked)
    folder.write(target, files)
    screen = console()
    terminal.show_plan(result, screen)
    screen.print(f"\nPlanned {path}; wrote {len(files)} files to {target}{os.sep}", soft_wrap=True)
    return result.exit_status


@app.command(epilog=_example("lines chain.toml"))
def lines(
    scenario: Annotated[Path, typer.Argument(metavar="SCENARIO", show_default=False, help="Scenario file (TOML).")],
) -> int:
    """Show every line at every node of the planned chain."""
    result = _planned(scenario).plan

    from harmonic_planner.report import terminal
    from harmonic_planner.report.console import console

    terminal.show_lines(result, console())
    return 0


@app.command(
    epilog=_example(
        'window --carrier "240 MHz" --line "120 MHz, 45 dB" \\\n      --line "359 MHz..361 MHz, 40 dB" --kit chip-0805'
    )
)
def window(
    carrier: Annotated[str, _choice("FREQUENCY", 'Carrier, "240 MHz", or its span, "239 MHz..241 MHz".')],
    line: Annotated[
        list[str],
        _choice("'FREQUENCY, REJECTION'", 'Unwanted line and the rejection it needs, "120 MHz, 45 dB"; one or more.'),
    ],
    kit: Annotated[
        list[str] | None, _choice("NAME", "Parts: a shipped kit or a kit file. Default: chip-0603. May be repeated.")
    ] = None,
    topology: Annotated[list[str] | None, _choice("NAME", "Circuit. Default: any. May be repeated.")] = None,
    family: Annotated[list[str] | None, _choice("NAME", "butterworth or chebyshev. Default: both.")] = None,
    order: Annotated[int | None, _choice("N", "Resonators. Default: the fewest that do.")] = None,
    flatness: Annotated[
        str | None, _choice("RATIO", 'Loss at the worst of span and drift over midband. Default: "1 dB".')
    ] = None,
    loss: Annotated[str | None, _choice("RATIO", 'Midband loss, at most. Default: "6 dB".')] = None,
    drift: Annotated[str | None, _choice("PERCENT", 'Movement of the centre. Default: "1 %".')] = None,
    min_bandwidth: Annotated[
        str | None, _choice("PERCENT", "Narrowest bandwidth. Default: what the tolerance of the parts allows.")
    ] = None,
    impedance: Annotated[str | None, _choice("RESISTANCE", 'Of both ports. Default: "50 ohm".')] = None,
    isolation: Annotated[
        str | None, _choice("RATIO", "What the layout isolates, past which nothing rejects. Default: not counted.")
    ] = None,
    resonator: Annotated[
        str | None, _choice("VALUE", 'Inductance or capacitance of coupled resonators, "8 nH". Default: what fits.')
    ] = None,
) -> int:
    """Choose one filter at the bench: windows, circuit and parts, without a file.

    Exit status 0: the filter as built does it and every part can be bought and placed. 3: it does not.
    """
    from harmonic_planner.bench_options import read

    keys = {"topology": topology, "families": family, "order": order, "flatness": flatness, "loss": loss}
    keys |= {"drift": drift, "min_bandwidth": min_bandwidth, "impedance": impedance, "isolation": isolation}
    here = Path()
    task = read(carrier, line, keys | {"kit": kit, "resonator": resonator}, here)

    from harmonic_planner.planning.bench import answer
    from harmonic_planner.report.console import console
    from harmonic_planner.report.window import does_it, show_window

    found = answer(task.carrier_hz, task.lines, task.design, here)
    show_window(found, task.lines, console())
    return 0 if does_it(found) else 3


@app.command(epilog=_example("budget chain.toml", "budget chain.toml --measured lines.csv --out chain-budget"))
def budget(
    scenario: Annotated[
        Path,
        typer.Argument(metavar="SCENARIO", show_default=False, help="Scenario file (TOML), every filter in it given."),
    ],
    measured: Annotated[
        Path | None,
        typer.Option(
            "--measured",
            metavar="FILE",
            show_default=False,
            help="Lines measured at the output, CSV: line or frequency, and level (dBc or dBm).",
        ),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            metavar="DIR",
            show_default=False,
            help="Folder for the results: new, empty, or from an earlier run, which is replaced. "
            "Default: nothing is written.",
        ),
    ] = None,
) -> int:
    """Show margins, causes and drive of a chain that exists; nothing is planned.

    Exit status 0: every line within its limit. 3: one is not. With --measured also what on the bench explains best how
    measured lines differ from computed ones.
    """
    from harmonic_planner.measured_lines import read_lines
    from harmonic_planner.planning.comparison import compare
    from harmonic_planner.planning.hardware import budget as budget_of
    from harmonic_planner.scenario import load

    loaded = load(scenario)
    bench = None if measured is None else read_lines(measured, loaded)
    if out is not None:
        folder.check(out)
    try:
        worked = budget_of(loaded)
        comparison = None if bench is None else compare(loaded, bench)
    except PlannerError as fault:
        raise PlannerError(f"{scenario}: {fault}") from fault

    from harmonic_planner.report.budget import show_budget
    from harmonic_planner.report.console import console
    from harmonic_planner.report.files import plan_files

    screen = console()
    files = {} if out is None else plan_files(worked, comparison)
    if out is not None:
        folder.write(out, files)
    show_budget(worked.plan, comparison, screen)
    if out is not None:
        screen.print(f"\nBudget of {scenario}; wrote {len(files)} files to {out}{os.sep}", soft_wrap=True)
    return worked.plan.exit_status


@app.command(epilog=_example("schema > scenario.schema.json"))
def schema() -> int:
    """Print the JSON Schema of scenario files."""
    import json

    from harmonic_planner.scenario import json_schema

    typer.echo(json.dumps(json_schema(), indent=2, ensure_ascii=False))
    return 0


@app.command(epilog=_example("new chain.toml"))
def new(
    file: Annotated[Path, typer.Argument(metavar="FILE", show_default=False, help="Scenario file to be written.")],
) -> int:
    """Write a commented scenario to start from.

    It plans as it is. A file that exists is left alone.
    """
    from harmonic_planner.scenario import TEMPLATE

    new_file.write(file, TEMPLATE)
    typer.echo(f"Wrote {file}. Plan it with: {PROGRAM} plan {file}")
    return 0


@app.command(epilog=_example("apply chain.toml 1", "apply chain.toml 2 --out wider.toml"))
def apply(
    scenario: Annotated[Path, typer.Argument(metavar="SCENARIO", show_default=False, help="Scenario file (TOML).")],
    number: Annotated[
        int, typer.Argument(metavar="N", show_default=False, help="Number of the proposal, as `plan` shows it.")
    ],
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            metavar="FILE",
            show_default=False,
            help="Scenario file to be written. Default: the scenario's name with -N, in the current folder.",
        ),
    ] = None,
) -> int:
    """Write a new scenario with one proposal of the plan taken.

    The scenario is planned again, and its text kept but for the keys of the stage concerned. A file that exists is left
    alone.
    """
    from harmonic_planner.applying import apply_proposal, changes, moved
    from harmonic_planner.scenario import loads, read_text

    target = Path(f"{scenario.stem}-{number}.toml") if out is None else out
    text = read_text(scenario)
    loaded = loads(text, path=scenario)
    new_file.check(target)
    proposals = numbered_proposals(_worked_out(loaded, scenario).plan)
    if not proposals:
        raise PlannerError(f"N = {number}: {scenario} has no proposal; `{PROGRAM} plan` says why")
    if not 1 <= number <= len(proposals):
        raise PlannerError(f"N = {number}: must be the number of a proposal for {scenario}, 1 to {len(proposals)}")
    chosen = proposals[number - 1]
    taken = apply_proposal(text, chosen.stage_index, chosen.proposal)
    result = moved(taken, from_folder=scenario.parent, to_folder=target.parent)
    loads(result, path=target)
    new_file.write(target, result)
    stage = loaded.stages[chosen.stage_index].name
    typer.echo(f"Proposal {number}, for stage {chosen.stage_index + 1}, {stage}: {chosen.proposal.change}")
    for change in changes(text, taken, chosen.stage_index):
        typer.echo(f"  {change}")
    typer.echo(f"Wrote {target}. Plan it with: {PROGRAM} plan {target}")
    return 0


def _planned(path: Path, before_planning: Callable[[], None] = lambda: None, *, what_if: bool = False) -> "WorkedOut":
    """Load a scenario and plan it; `before_planning` may raise once the scenario is known to be good."""
    from harmonic_planner.scenario import load

    scenario = load(path)
    before_planning()
    return _worked_out(scenario, path, what_if=what_if)


def _worked_out(scenario: Scenario, path: Path, *, what_if: bool = False) -> "WorkedOut":
    """Plan the scenario of a file, which is named where that fails; with what lies around the plan on request."""
    from harmonic_planner.planning.explore import explored
    from harmonic_planner.planning.plan import work_out

    try:
        worked = work_out(scenario)
        return explored(scenario, worked) if what_if else worked
    except PlannerError as fault:
        raise PlannerError(f"{path}: {fault}") from fault


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        What follows the program's name; taken from the command line when left out.

    Returns
    -------
    int
        The exit status.
    """
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # small matrices: threads cost more than they bring
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")  # a terminal that cannot show × shows ?
    try:
        with stopping_on_signals():
            command = typer.main.get_command(app)
            args = None if arguments is None else list(arguments)
            status = command.main(args=args, prog_name=PROGRAM, standalone_mode=False)
            sys.stdout.flush()
    except StoppedError as stop:
        return _fail(128 + stop.number, f"stopped by {signal.Signals(stop.number).name}")
    except BrokenPipeError:
        with suppress(OSError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except OutputWriteError as fault:
        return _fail(1, str(fault))
    except PlannerError as fault:
        return _fail(2, str(fault))
    except SystemExit as stop:
        return stop.code if isinstance(stop.code, int) else 1
    except Exception as fault:
        return _fail(*_explain(fault))
    return status if isinstance(status, int) else 0


def _explain(fault: Exception) -> tuple[int, str]:
    """Give the exit status and the message of a wrong command line, or of a fault nobody expected."""
    describe = getattr(fault, "format_message", None)  # every fault in a command line has it, in any version of typer
    if callable(describe):
        return 2, f"{str(describe()).rstrip('.')}. See: {PROGRAM} --help"
    if os.environ.get(DEBUG):
        traceback.print_exc()
    cause = f"{type(fault).__name__}: {fault}" if str(fault) else type(fault).__name__
    return 1, f"unexpected fault inside the program: {cause}. For details set {DEBUG}=1 and run again"


def _fail(status: int, message: str) -> int:
    """Write a message to standard error, every line of it marked, and return the status."""
    with suppress(OSError, ValueError):
        for line in message.splitlines():
            shown = "".join(character if character.isprintable() else "?" for character in line)
            typer.echo(f"error: {shown}", err=True)
    return status
