"""A filter known by what it does at some frequencies, in its place in the chain.

Notes
-----
Between its frequencies attenuation is interpolated in dB over the logarithm of frequency: skirts are all but straight
there. Read so from the Touchstone files that this program writes, whose frequencies are 0.4 % apart at most, rejections
and output margins are within 0.03 dB of the circuit's own (regression, unconfirmed: the shipped scenarios; at 1 % it
was 0.17 dB, beside the notches of strays). A coarse table is as good as its points.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import ChainArrays
from harmonic_planner.chain.propagate import path_gains, propagate
from harmonic_planner.model import FilterPlan, MeasuredFilter, PlannerError, Requirement, Scenario
from harmonic_planner.planning.jobs import Array, Attenuation, Job, act
from harmonic_planner.planning.stage_filter import StageFilter

NEGLIGIBLE_DB = -40.0
"""A line outside a filter's frequencies is passed over where, let through whole, it stays this far under each limit."""
_BAND_DB = 3.0
_MOST_POINTS = 481


def measured(job: Job, description: MeasuredFilter) -> StageFilter:
    """Return a measured filter in its place.

    Parameters
    ----------
    job : Job
    description : MeasuredFilter

    Returns
    -------
    StageFilter
        `centre_hz` and `bandwidth` are those of the band 3 dB below its best around the carrier, None where the
        frequencies end before.

    Raises
    ------
    PlannerError
        Where the carrier, over span and drift, lies outside the filter's frequencies.
    """
    carrier_hz = _carrier_hz(job)
    low, high = description.frequency_hz[0], description.frequency_hz[-1]
    if carrier_hz[0] < low or carrier_hz[1] > high:
        raise PlannerError(
            f"{_key(job, description)}: the carrier, {_mhz(carrier_hz)} over span and drift, lies outside its "
            f"frequencies, {_mhz((low, high))}{_stage(job)}"
        )
    attenuation = interpolated(description, carrier_hz)
    band = _band(description, carrier_hz)
    return StageFilter(
        description.source,
        act(job, attenuation),
        attenuation,
        attenuation,
        centre_hz=None if band is None else float(np.sqrt(band[0] * band[1])),
        bandwidth=None if band is None else float((band[1] - band[0]) / np.sqrt(band[0] * band[1])),
        reason=f"as measured in {description.file}"
        if description.source == "touchstone"
        else f"by the table {description.file}",
    )


def interpolated(description: MeasuredFilter, carrier_hz: tuple[float, float]) -> Attenuation:
    """Return attenuation over frequency; outside the filter's frequencies no rejection, as of the carrier at its best.

    Parameters
    ----------
    description : MeasuredFilter
    carrier_hz : (float, float)
        What of the filter's frequencies the carrier may meet [Hz].
    """
    over = np.log(np.array(description.frequency_hz))
    known_db = np.array(description.attenuation_db)
    on_carrier = np.concatenate(
        [np.log(carrier_hz), over[(over >= np.log(carrier_hz[0])) & (over <= np.log(carrier_hz[1]))]]
    )
    passing_db = float(np.interp(on_carrier, over, known_db).min())

    def attenuation(frequency_hz: Array) -> Array:
        return np.asarray(np.interp(np.log(frequency_hz), over, known_db, left=passing_db, right=passing_db))

    return attenuation


def outside(job: Job, description: MeasuredFilter) -> NDArray[np.bool_]:
    """Mark the lines of which span and drift leave the filter's frequencies, (lines,)."""
    up, down = 1 + job.design.drift, 1 - job.design.drift
    low, high = description.frequency_hz[0], description.frequency_hz[-1]
    return np.asarray((job.low_hz / up < low) | (job.high_hz / down > high))


def refuse_beyond(chain: ChainArrays, jobs: Sequence[Job], transmissions: Sequence[Array]) -> tuple[str, ...]:
    """Refuse lines that a measured filter says nothing of, unless they do not matter or the user lets them pass.

    Parameters
    ----------
    chain : ChainArrays
        With the limits as the user gave them.
    jobs : sequence of Job
    transmissions : sequence of (points, lines) float
        Of all filters; lines outside a filter's frequencies pass it as the carrier does.

    Returns
    -------
    tuple of str
        What was taken for granted, for the plan's assumptions.

    Raises
    ------
    PlannerError
        Naming the file, its frequencies, the line that matters most, and where.
    """
    most = [np.reshape(t, (-1, chain.grid.count)).max(axis=0) for t in transmissions]
    made = [comb.device for comb in propagate(chain, most, allowed=True)]
    assumed = []
    for i, job in enumerate(jobs):
        description = job.stage.filter
        if not isinstance(description, MeasuredFilter):
            continue
        unknown = outside(job, description) & (made[i] > 0)
        if not unknown.any():
            continue
        worst = _largest_share(chain, most, i, made[i] * unknown)
        share_db = float(chain.to_db(worst.share))
        sweep = _mhz((description.frequency_hz[0], description.frequency_hz[-1]))
        if description.beyond_sweep == "refuse" and share_db > NEGLIGIBLE_DB:
            span = _mhz((job.low_hz[worst.line], job.high_hz[worst.line]))
            raise PlannerError(
                f"{_key(job, description)}: line {chain.grid.line(worst.line)}, {span}, lies outside its frequencies, "
                f"{sweep}, and may matter: let through it comes to {share_db:+.1f} dB of the limit of line "
                f'{chain.grid.line(worst.at)}; measure further, or set beyond_sweep = "no-rejection"{_stage(job)}'
            )
        why = (
            f"they stay {-share_db:.0f} dB under every limit" if share_db <= NEGLIGIBLE_DB else "beyond_sweep allows it"
        )
        assumed.append(
            f"{job.stage.name}: outside {sweep}, the frequencies of {description.file}, lines are taken to pass as the "
            f"carrier does; {why}"
        )
    return tuple(assumed)


@dataclass(frozen=True)
class _Share:
    """How much of a limit a line takes at most, which line, and the limit of which line (array indices)."""

    share: float
    line: int
    at: int


def _largest_share(chain: ChainArrays, transmissions: Sequence[Array], index: int, made: Array) -> _Share:
    """Return the largest share of any limit that a line let through stage `index` takes, allowances counted."""
    found = _Share(0.0, int(np.argmax(made)), chain.stages[-1].carrier)
    for to in range(index, len(chain.stages)):
        limit = chain.stages[to].limit
        if not np.isfinite(limit).any():
            continue
        into = path_gains(chain, transmissions, after=index, to=to, allowed=True) * (
            chain.stages[index].mismatch * made
        )
        shares = into / limit[:, None]
        at, line = np.unravel_index(int(np.argmax(shares)), shares.shape)
        if shares[at, line] > found.share:
            found = _Share(float(shares[at, line]), int(line), int(at))
    return found


def measured_plan(job: Job, placed: StageFilter, requirement: tuple[Requirement, ...]) -> FilterPlan:
    """Return what the plan says of a measured filter."""
    description = job.stage.filter
    assert isinstance(description, MeasuredFilter)
    keep = np.unique(np.linspace(0, len(description.frequency_hz) - 1, _MOST_POINTS).round().astype(int))
    return FilterPlan(
        source=placed.source,
        centre_hz=placed.centre_hz,
        bandwidth_hz=None
        if placed.centre_hz is None or placed.bandwidth is None
        else placed.centre_hz * placed.bandwidth,
        loss_db=placed.action.carrier_least_db,
        return_loss_db=_return_loss_db(job, description),
        impedance_ohm=job.design.impedance_ohm,
        touchstone=description.file if description.source == "touchstone" else None,
        reason=placed.reason,
        requirement=requirement,
        response_hz=tuple(description.frequency_hz[i] for i in keep),
        response_db=tuple(description.attenuation_db[i] for i in keep),
    )


def notes_on_measured(scenario: Scenario) -> tuple[str, ...]:
    """Return what is assumed of every measured filter."""
    found = []
    for stage in scenario.stages:
        description = stage.filter
        if not isinstance(description, MeasuredFilter):
            continue
        found.append(f"{stage.name}: {description.file} is read between its points straight in dB over log frequency")
        ports = description.impedance_ohm
        if ports is not None and any(abs(z - stage.design.impedance_ohm) > 1e-9 for z in ports):
            between = " and ".join(f"{z:g}" for z in dict.fromkeys(ports))
            found.append(
                f"{stage.name}: {description.file}, measured between {between} ohm, is recalculated to "
                f"{stage.design.impedance_ohm:g} ohm"
            )
    return tuple(found)


def _carrier_hz(job: Job) -> tuple[float, float]:
    """Return what of the response the carrier meets over span and drift [Hz]."""
    return job.carrier_hz[0] / (1 + job.design.drift), job.carrier_hz[1] / (1 - job.design.drift)


def _return_loss_db(job: Job, description: MeasuredFilter) -> float | None:
    """Return the least return loss over the carrier's span and drift, None for a table."""
    if not description.return_loss_db:
        return None
    over = np.log(np.array(description.frequency_hz))
    at = np.log(np.linspace(*_carrier_hz(job), 41))
    return float(np.interp(at, over, np.array(description.return_loss_db)).min())


def _band(description: MeasuredFilter, carrier_hz: tuple[float, float]) -> tuple[float, float] | None:
    """Return where attenuation is 3 dB above its least around the carrier [Hz]; None where a side is not to be seen."""
    over, known_db = np.log(np.array(description.frequency_hz)), np.array(description.attenuation_db)
    middle = float(np.log(np.sqrt(carrier_hz[0] * carrier_hz[1])))
    start = int(np.argmin(np.abs(over - middle)))
    while 0 < start < len(over) - 1 and known_db[start] > min(known_db[start - 1], known_db[start + 1]):
        start += 1 if known_db[start + 1] < known_db[start - 1] else -1
    edge_db = known_db[start] + _BAND_DB
    above = np.flatnonzero(known_db > edge_db)
    below, beyond = above[above < start], above[above > start]
    if below.size == 0 or beyond.size == 0:
        return None
    ends = ((below[-1], below[-1] + 1), (beyond[0], beyond[0] - 1))
    low, high = (np.interp(edge_db, known_db[[b, a]], over[[b, a]]) for a, b in ends)
    return float(np.exp(low)), float(np.exp(high))


def _key(job: Job, description: MeasuredFilter) -> str:
    return f'stage[{job.index + 1}].filter.{description.source} = "{description.file}"'


def _stage(job: Job) -> str:
    return f' (stage "{job.stage.name}")'


def _mhz(span_hz: tuple[float, float]) -> str:
    low, high = (f"{x / 1e6:.6g}" for x in span_hz)
    return f"{low} MHz" if low == high else f"{low} to {high} MHz"
