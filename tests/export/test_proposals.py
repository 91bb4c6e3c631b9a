"""The numbers of proposals: over all stages, in the plan's order, without a gap."""

from dataclasses import replace

from harmonic_planner.export.proposals import numbered_proposals

from plan_fixture import buffer_stage, doubler, example_plan


def with_proposals(*changes: str):
    (one,) = doubler().filter.proposals
    proposals = tuple(replace(one, change=change) for change in changes)
    return replace(doubler(), filter=replace(doubler().filter, proposals=proposals))


def test_numbers_run_over_all_stages_best_first():
    stages = (with_proposals("a", "b"), buffer_stage(), with_proposals("c"))
    numbered = numbered_proposals(replace(example_plan(), stages=stages))
    assert [(each.number, each.stage_index, each.proposal.change) for each in numbered] == [
        (1, 0, "a"),
        (2, 0, "b"),
        (3, 2, "c"),
    ]


def test_a_plan_without_proposals_has_no_numbers():
    assert numbered_proposals(replace(example_plan(), stages=(buffer_stage(),))) == ()
