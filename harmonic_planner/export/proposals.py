"""The one numbering of a plan's proposals, which people type and the terminal shows."""

from dataclasses import dataclass

from harmonic_planner.model import Plan, Proposal


@dataclass(frozen=True)
class NumberedProposal:
    """A proposal and where it belongs."""

    number: int
    """From 1, over all stages."""
    stage_index: int
    """From 0."""
    proposal: Proposal


def numbered_proposals(plan: Plan) -> tuple[NumberedProposal, ...]:
    """Return every proposal of a plan with its number, stage by stage, the best of each stage first.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    tuple of NumberedProposal
        In the order of ``plan.json``, numbers without a gap.
    """
    every = ((i, proposal) for i, stage in enumerate(plan.stages) for proposal in stage.filter.proposals)
    return tuple(NumberedProposal(number, i, proposal) for number, (i, proposal) in enumerate(every, start=1))
