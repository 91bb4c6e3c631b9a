"""Everything a plan's folder holds."""

from dataclasses import replace

from harmonic_planner.export.filter_files import filter_files, filter_names
from harmonic_planner.export.names import stage_stem
from harmonic_planner.export.nodes import line_frequency_hz
from harmonic_planner.export.plan_json import layout, plain, plan_json
from harmonic_planner.export.tables import elements_csv, lines_csv, requirements_csv
from harmonic_planner.model import Plan, StagePlan
from harmonic_planner.planning.built import Built, passband_hz
from harmonic_planner.planning.comparison import Comparison
from harmonic_planner.planning.plan import WorkedOut
from harmonic_planner.report.figures import stage_figures, trade_figure


def plan_files(worked: WorkedOut, comparison: Comparison | None = None) -> dict[str, bytes | str]:
    """Make every file of a plan.

    Parameters
    ----------
    worked : WorkedOut
        The plan, with the circuits behind it.
    comparison : Comparison, optional
        With lines measured at the output.

    Returns
    -------
    dict of str to bytes or str
        File name and content: ``plan.json``, three tables, two figures a stage, and for every filter that is a circuit
        a netlist, a bench deck and a Touchstone file; ``trade.png`` where the plan has a trade, ``comparison.json``
        where there is a comparison. The same plan gives the same bytes.
    """
    plan = with_file_names(worked)
    files: dict[str, bytes | str] = {
        "lines.csv": lines_csv(plan),
        "requirements.csv": requirements_csv(plan),
        "elements.csv": elements_csv(plan),
        **stage_figures(plan),
        **trade_figure(plan),
    }
    for number, (stage, built) in enumerate(zip(plan.stages, worked.circuits, strict=True), start=1):
        if built is not None:
            files |= _of_filter(plan, number, stage, built)
    if comparison is not None:
        files["comparison.json"] = layout(plain(comparison)) + "\n"
    return {"plan.json": plan_json(plan, [*files, "plan.json"]), **files}


def with_file_names(worked: WorkedOut) -> Plan:
    """Return the plan with the names of each circuit's files in it."""
    stages = []
    for number, (stage, built) in enumerate(zip(worked.plan.stages, worked.circuits, strict=True), start=1):
        names = filter_names(stage_stem(number, stage.name))
        named = replace(stage.filter, netlist=names.netlist, touchstone=names.touchstone)
        stages.append(stage if built is None else replace(stage, filter=named))
    return replace(worked.plan, stages=tuple(stages))


def _of_filter(plan: Plan, number: int, stage: StagePlan, built: Built) -> dict[str, str]:
    """Write the files of one filter; lines that need no rejection have no frequency of their own in them."""
    present_hz = [edge for level in stage.device_lines for edge in line_frequency_hz(plan, level.line)]
    return filter_files(
        stage_stem(number, stage.name),
        f"{plan.title}: {stage.name}",
        built.circuit,
        built.form.kit,
        carrier_hz=stage.frequency_hz,
        passband_hz=passband_hz(built),
        lines_hz={r.line: r.frequency_hz for r in stage.filter.requirement if r.required_db > 0},
        present_hz=(min(present_hz), max(present_hz)) if present_hz else None,
    )
