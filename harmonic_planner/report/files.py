"""Everything a plan's folder holds."""

from harmonic_planner.export.plan_json import plan_json
from harmonic_planner.export.tables import elements_csv, lines_csv, requirements_csv
from harmonic_planner.model import Plan
from harmonic_planner.report.figures import stage_figures


def plan_files(plan: Plan) -> dict[str, bytes | str]:
    """Make every file of a plan.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    dict of str to bytes or str
        File name and content: ``plan.json``, three tables, two figures a stage. The same plan gives the same bytes.
    """
    files: dict[str, bytes | str] = {
        "lines.csv": lines_csv(plan),
        "requirements.csv": requirements_csv(plan),
        "elements.csv": elements_csv(plan),
        **stage_figures(plan),
    }
    return {"plan.json": plan_json(plan, [*files, "plan.json"]), **files}
