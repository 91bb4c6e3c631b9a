"""What a change to the chain would do to the count of resonators: each one searched anew, none built."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

from harmonic_planner.chain.allocate import allocate_within
from harmonic_planner.chain.allocation import Allocation
from harmonic_planner.chain.budget import with_margin
from harmonic_planner.model import Design, Isolation, Phases, Plan, Scenario, Stage, WhatIf
from harmonic_planner.planning.joint import Offers, Searched, losses_of, margin_db, search

PAD_DB = 3.0
BALANCE_DB = 10.0
SHIELD_DB = 20.0
_BALANCED = ("push-push", "push-pull")
_MOST_SHORT_DB = 64.0
_CLOSE_DB = 0.1


@dataclass(frozen=True)
class Change:
    """A chain that differs in one thing.

    Attributes
    ----------
    stages_before : int
        How many stages were put in front.
    """

    change: str
    price: str
    scenario: Scenario
    stages_before: int = 0


def changes(scenario: Scenario) -> Iterator[Change]:
    """Yield pads, better balance, shields, a filter for the source, and the other phase rule, in this order."""
    for i, stage in enumerate(scenario.stages):
        if stage.filter != "none":
            level = f"{PAD_DB:g} dB of level at {stage.name}"
            before = replace(stage, pad_db=stage.pad_db + PAD_DB)
            after = replace(stage, pad_after_db=stage.pad_after_db + PAD_DB)
            yield Change(f"{PAD_DB:g} dB more pad before the filter of {stage.name}", level, _with(scenario, i, before))
            yield Change(f"{PAD_DB:g} dB more pad behind the filter of {stage.name}", level, _with(scenario, i, after))
    for i, stage in enumerate(scenario.stages):
        if stage.device is not None and stage.device.type in _BALANCED:
            better = replace(stage.device, balance_db=stage.device.balance_db + BALANCE_DB)
            yield Change(
                f"{BALANCE_DB:g} dB better balance of {stage.name}, {better.balance_db:g} dB",
                "a matched or adjusted pair",
                _with(scenario, i, replace(stage, device=better)),
            )
    for i, stage in enumerate(scenario.stages):
        isolation = stage.design.isolation
        if isolation.level_db < float("inf"):
            shielded = Isolation(isolation.level_db + SHIELD_DB, isolation.flat)
            yield Change(
                f"{SHIELD_DB:g} dB more isolation at {stage.name}",
                "a shield",
                _with(scenario, i, replace(stage, design=replace(stage.design, isolation=shielded))),
            )
    if scenario.source.lines_dbc:
        cleaner = Stage(_free_name(scenario), 1, None, pad_after_db=PAD_DB, design=_free(scenario.design))
        yield Change(
            f"a filter for the source, counted, {PAD_DB:g} dB of pad behind it",
            f"its loss and {PAD_DB:g} dB of level at {scenario.stages[0].name}",
            replace(scenario, stages=(cleaner, *scenario.stages)),
            stages_before=1,
        )
    other: Phases = "average" if scenario.design.phases == "worst-case" else "worst-case"
    yield Change(
        f'phases = "{other}"',
        "the worst case is then not covered" if other == "average" else "",
        replace(scenario, design=replace(scenario.design, phases=other)),
    )


def what_if(scenario: Scenario, plan: Plan, offers: Offers | None = None) -> tuple[WhatIf, ...]:
    """Search the chain anew for every change, and for a resonator more or fewer.

    Parameters
    ----------
    scenario : Scenario
    plan : Plan
        Of this scenario; its filters' losses set the carrier levels.
    offers : Offers, optional
        Options already made for this scenario; new ones are kept there.

    Returns
    -------
    tuple of WhatIf
        Empty where nothing is to be planned.
    """
    if not any(stage.filter == "plan" for stage in scenario.stages):
        return ()
    offers, losses_db = offers or Offers(), losses_of(plan)
    now = search(scenario, losses_db, offers)
    rows = [*_resonators(now)]
    for change in changes(scenario):
        then = search(change.scenario, [0.0] * change.stages_before + losses_db, offers)
        rows.append(_row(now, change.change, change.price, then.allocation, then.margin_db, ideal=then.ideal))
    return tuple(rows)


def _resonators(now: Searched) -> Iterator[WhatIf]:
    """Yield what a resonator more buys and one fewer misses; nothing where limits are missed as it is."""
    if not now.allocation.met:
        return
    total = now.allocation.total
    more = allocate_within(now.target, now.rows, total=total + 1, largest_margin=True)
    if more is not None:
        margin = margin_db(now.chain, more.rejections(now.rows))
        if margin < now.margin_db:  # the norm that the search looks at is close to the least margin, not the same
            more, margin = now.allocation, now.margin_db
        yield _row(now, "one resonator more", "a resonator", replace(more, total=total + 1, proven=True), margin)
    fewer = _nearest(now, total - 1)
    if fewer is not None:
        margin = margin_db(now.chain, fewer.rejections(now.rows))
        yield _row(now, "one resonator fewer", "", replace(fewer, met=False), margin)


def _nearest(now: Searched, total: int) -> Allocation | None:
    """Return the allocation of `total` that misses the limits by least, to 0.1 dB; None where no filters count so."""

    def found(by_db: float) -> Allocation | None:
        return allocate_within(with_margin(now.target, [-by_db] * len(now.jobs)), now.rows, total=total)

    low, high = 0.0, 1.0
    best = found(high)
    while best is None and high < _MOST_SHORT_DB:
        low, high = high, 2 * high
        best = found(high)
    while best is not None and high - low > _CLOSE_DB:
        middle = (low + high) / 2
        nearer = found(middle)
        if nearer is None:
            low = middle
        else:
            best, high = nearer, middle
    return best


def _row(
    now: Searched, change: str, price: str, then: Allocation, least_margin_db: float, *, ideal: bool = False
) -> WhatIf:
    was, note = now.allocation, ""
    if ideal or now.ideal:
        note = "strays left out: with them the limits are out of reach"
    elif then.met and not then.proven:
        note = f"at least {then.lower_bound}; the search was ended early"
    return WhatIf(change, price, was.total, was.met, now.margin_db, then.total, then.met, least_margin_db, note)


def _with(scenario: Scenario, index: int, stage: Stage) -> Scenario:
    return replace(scenario, stages=(*scenario.stages[:index], stage, *scenario.stages[index + 1 :]))


def _free(design: Design) -> Design:
    """Return the chain's design keys with nothing fixed for one filter."""
    return replace(design, order=None, bandwidth=None, resonator_h=None, resonator_f=None)


def _free_name(scenario: Scenario) -> str:
    """Return a name that no stage has."""
    name, used = "source filter", {stage.name for stage in scenario.stages}
    while name in used:
        name = f"{name}'"
    return name
