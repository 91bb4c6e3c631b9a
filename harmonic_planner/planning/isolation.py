"""Where leakage is what fails a limit: the isolation needed, between which nodes, at which frequency.

A line's level is affine in what leaks past each filter and from each earlier carrier, so what each of them adds is what
the line would lose without it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.propagate import births, path_gains, propagate
from harmonic_planner.model import Scenario
from harmonic_planner.planning.jobs import Job
from harmonic_planner.planning.settle import Settled

_DECISIVE = 0.5
"""Share of a limit from which leakage is what fails it: a filter could not mend it by itself."""
_LEFT = 0.5
"""Share of a limit that is left to leakage where filters, planned anew, have yet to bring the rest down."""
_NAMED = 0.1
"""Share of all leakage from which one is named."""
_SLACK_DB = 0.05


@dataclass(frozen=True)
class Way:
    """One way in which a line leaks.

    Attributes
    ----------
    adds : float
        What it adds to the line, in the chain's quantity, allowances counted.
    between : str
        The nodes between which isolation is missing.
    frequency_hz : float
        Highest of what leaks.
    isolation_db : float
        As counted.
    """

    adds: float
    between: str
    frequency_hz: float
    isolation_db: float


def leak_shortfall(
    scenario: Scenario, chain: ChainArrays, jobs: Sequence[Job], settled: Settled, *, to: int, line: int
) -> str:
    """Say what isolation a missed limit needs, where leakage is what fails it.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
        With the limits as the user gave them.
    jobs : sequence of Job
    settled : Settled
    to, line : int
        The limit: stage at whose output it stands, array index of the line.

    Returns
    -------
    str
        Empty where leakage is not the reason.
    """
    passed = [chain.from_db(-f.action.rejection_db) for f in settled.filters]
    level = float(propagate(chain, passed, allowed=True)[to].leaving[line])
    allowed = float(chain.stages[to].limit[line] / chain.from_db(scenario.stages[to].design.margin_db))
    found = [
        *_of_carriers(scenario, chain, passed, to, line),
        *_past_filters(scenario, chain, jobs, settled, passed, to, line),
    ]
    leaking = sum(way.adds for way in found)
    if not found or level <= allowed or leaking < _DECISIVE * allowed:
        return ""
    others = level - leaking
    room = allowed - others if others < allowed else allowed * _LEFT
    if leaking <= room:
        return ""
    more_db = float(chain.to_db(leaking / room)) + _SLACK_DB
    ways = sorted((way for way in found if way.adds >= _NAMED * leaking), key=lambda way: -way.adds)
    words = "; ".join(
        f"{np.ceil(way.isolation_db + more_db):.0f} dB of isolation {way.between} at {way.frequency_hz / 1e6:.5g} MHz, "
        f"where {way.isolation_db:.0f} dB is counted"
        for way in ways
    )
    return f"leakage is the reason, and a shield is needed, not a resonator: {words}"


def _of_carriers(scenario: Scenario, chain: ChainArrays, passed: Sequence[Array], to: int, line: int) -> list[Way]:
    """Return what earlier carriers add to a line."""
    names = [stage.name for stage in scenario.stages]
    nodes = [f"the input of {name}" for name in names[1:]] + ["the output"]
    counted = {(leak.origin, node): leak for node, stage in enumerate(chain.stages) for leak in stage.leaks}
    found = []
    for birth in births(chain, passed, to=to, allowed=True):
        if birth.part == "leak":
            leak = counted[birth.stage, birth.behind]
            start = "the source" if birth.stage < 0 else f"the carrier of {names[birth.stage]}"
            found.append(
                Way(
                    adds=float(birth.paths[line].sum()),
                    between=f"between {start} and {nodes[birth.behind]}",
                    frequency_hz=float(chain.high_hz[leak.line]),
                    isolation_db=leak.isolation_db,
                )
            )
    return found


def _past_filters(
    scenario: Scenario,
    chain: ChainArrays,
    jobs: Sequence[Job],
    settled: Settled,
    passed: Sequence[Array],
    to: int,
    line: int,
) -> list[Way]:
    """Return what leakage past each filter adds to a line."""
    combs = propagate(chain, passed, allowed=True)
    found = []
    for i, (job, placed) in enumerate(zip(jobs[: to + 1], settled.filters, strict=False)):
        past = np.maximum(passed[i] - chain.from_db(-placed.action.skirt_db), 0.0)
        gains = path_gains(chain, passed, after=i, to=to, allowed=True)[line]
        adds = gains * (chain.stages[i].mismatch * past * combs[i].device)
        most = int(np.argmax(adds))
        if adds[most] > 0:
            found.append(
                Way(
                    adds=float(adds.sum()),
                    between=f"between input and output of the filter of {scenario.stages[i].name}",
                    frequency_hz=float(job.high_hz[most]),
                    isolation_db=float(job.leak_db[most]),
                )
            )
    return found
