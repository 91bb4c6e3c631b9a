"""Whether a plan holds, and the one sentence that says so."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from harmonic_planner.chain.assemble import ChainArrays
from harmonic_planner.chain.propagate import births
from harmonic_planner.model import ElementReport, Scenario, StagePlan
from harmonic_planner.planning.evaluate import Run
from harmonic_planner.planning.isolation import leak_shortfall
from harmonic_planner.planning.jobs import Job
from harmonic_planner.planning.settle import Settled

_ROUNDING_DB = 1e-9


def limits_met(scenario: Scenario, run: Run, settled: Settled) -> bool:
    """Tell whether every limit holds with its margin and every planned filter gives what it is held to."""
    asked = np.array([s.design.margin_db for s in scenario.stages])[:, None]
    return bool((run.margin_db >= asked - _ROUNDING_DB).all()) and all(f.meets for f in settled.filters)


def sentence(
    scenario: Scenario,
    chain: ChainArrays,
    run: Run,
    jobs: Sequence[Job],
    settled: Settled,
    stages: Sequence[StagePlan],
    *,
    met: bool,
    buildable: bool,
    checked: bool,
) -> str:
    """Say in one sentence whether the plan can be used, and if not, why and what would help."""
    over = run.margin_db - np.array([s.design.margin_db for s in scenario.stages])[:, None]
    to, k = np.unravel_index(int(np.argmin(over)), over.shape)
    where = "at the output" if to == len(chain.stages) - 1 else f"behind {scenario.stages[to].name}"
    line = chain.grid.line(int(k))
    resonators = sum(f.built.resonators for f in settled.filters if f.source == "planned" and f.built is not None)
    count = sum(s.filter.source == "planned" for s in stages)
    if met:
        limits = (
            f"every line is within its limit; the closest, line {line} {where}, has {run.margin_db[to, k]:.1f} dB of "
            f"margin with {_filters_words(resonators, count)}"
        )
    else:
        limits = f"line {line} {where} has a margin of {run.margin_db[to, k]:.1f} dB" + _shortfall(
            scenario, chain, jobs, settled, int(to), int(k)
        )
    if not checked:
        return f"Not met: a self-check failed; {limits}."
    if met and buildable:
        return f"Met: {limits}{', and every part can be built' if count else ''}."
    problems = [] if met else [limits]
    if not buildable:
        problems.append(_unbuildable(stages))
        if met:
            problems.append(limits)
    return f"Not met: {'; '.join(problems)}."


def _filters_words(resonators: int, count: int) -> str:
    """Say with how many resonators and filters."""
    if not count:
        return "the filters that are there"
    return f"{resonators} resonator{'s' if resonators != 1 else ''} in {count} filter{'s' if count != 1 else ''}"


def _shortfall(scenario: Scenario, chain: ChainArrays, jobs: Sequence[Job], settled: Settled, to: int, k: int) -> str:
    """Say what keeps the limit from being met."""
    if leak := leak_shortfall(scenario, chain, jobs, settled, to=to, line=k):
        return f"; {leak}"
    out_of_reach = bool(settled.needed.out_of_reach[to, k])
    if out_of_reach and (overlap := _overlap(scenario, chain, settled, to, k)):
        return f", and no filter can take it out: {overlap}"
    amplifier = scenario.stages[to].amplifier
    if out_of_reach and amplifier is not None and chain.stages[to].amplifier[k] > 0:
        return (
            f", and the amplifier of {scenario.stages[to].name} makes it behind the last filter: "
            "a clean-up stage (times = 1) with a filter would take it out"
        )
    unfit = [(s.name, f.reason) for s, f in zip(scenario.stages, settled.filters, strict=True) if not f.meets]
    if unfit:
        return f"; {unfit[0][0]} has no filter that does what is needed: {unfit[0][1]}"
    if out_of_reach:
        return ", and no filter can take it out: it is too close to the carrier"
    return ""


def _overlap(scenario: Scenario, chain: ChainArrays, settled: Settled, to: int, k: int) -> str:
    """Say where the line was born, if it overlapped the carrier there over span and drift."""
    rejections = [chain.from_db(-f.action.rejection_db) for f in settled.filters]
    worst = max(births(chain, rejections, to=to), key=lambda b: float(b.paths[k].max()))
    born, i = int(worst.paths[k].argmax()), max(worst.stage, 0)
    stage, arrays = scenario.stages[i], chain.stages[i]
    apart = (1 - stage.design.drift) / (1 + stage.design.drift)
    low, high = chain.low_hz, chain.high_hz
    line, carrier = chain.grid.line(born), chain.grid.line(arrays.carrier)
    if high[born] < low[arrays.carrier] * apart or low[born] * apart > high[arrays.carrier] or line == carrier:
        return ""
    return (
        f"over span and drift line {line} of {stage.name} ({low[born] / 1e6:.5g} to {high[born] / 1e6:.5g} MHz) "
        f"overlaps the carrier ({low[arrays.carrier] / 1e6:.5g} to {high[arrays.carrier] / 1e6:.5g} MHz); a narrower "
        "span, or switched sub-bands with a filter each, would"
    )


def _unbuildable(stages: Sequence[StagePlan]) -> str:
    """Name the stages whose parts strays would swamp, and what would help."""
    words = []
    for s in stages:
        if s.filter.source != "planned":
            continue
        swamped = [e for e in s.filter.elements if e.verdict == "swamped"]
        helpful = next((p for p in s.filter.proposals if p.buildable), None)
        if s.filter.order is None:
            words.append(f"{s.name} has no filter")
        elif swamped:
            remedy = (
                f"{helpful.change} would help, {helpful.bandwidth_hz / helpful.centre_hz:.0%} wide"
                if helpful is not None
                else "no ladder helps"
            )
            words.append(f"{s.name} ({swamped[0].ref} {_first_reason(swamped[0])}; {remedy})")
    return "strays or missing values keep these filters from being built: " + ", ".join(words)


def _first_reason(element: ElementReport) -> str:
    """Return the gravest of an element's reasons."""
    return element.reason.split(";")[0]
