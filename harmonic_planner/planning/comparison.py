"""Lines measured at the output against computed ones, and what on the bench explains the difference best."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from harmonic_planner.chain.assemble import Array, assemble, at_levels
from harmonic_planner.chain.exact import amplifier_drive_db, combs_of
from harmonic_planner.chain.exact_stage import exact_stages, random_phases
from harmonic_planner.chain.explain import APART, Fit, Readings, explain, telling_line
from harmonic_planner.chain.levels import CarrierLevels, carrier_levels
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.model import PlannerError, Scenario
from harmonic_planner.planning.hardware import asking_nothing, refuse_unplanned
from harmonic_planner.planning.jobs import make_jobs
from harmonic_planner.planning.settle import settle
from harmonic_planner.planning.suspects import FAINTEST_DBC, Bench, Named, Part, suspects

MEASUREMENT_DB = 1.0
"""Standard deviation of a level read from a spectrum analyser, relative to the carrier's [dB] (memory)."""
CHANGED = 10.0
"""Misfit that the best change must take away before anything needs explaining: with nothing changed the best of some
thirty took away 8.5 at most (regression, unconfirmed: 150 exact runs of three chains)."""
HINT = 5.0
DRAWS = 400
"""Random phases that the lines to be expected are drawn over."""
SEED = 0
_SHOWN = 5
_BLOCK = 50
_TELLING_DB = 3.0
_TELLING_DBC = -110.0


@dataclass(frozen=True)
class MeasuredLines:
    """What was read at the output.

    Attributes
    ----------
    lines : tuple of Fraction
        Without the carrier.
    levels : tuple of float
        In dBc, or in dBm where `carrier_dbm` is to be subtracted.
    in_dbm : bool
    carrier_dbm : float or None
        As measured; None takes the computed one.
    source_hz : float
        Frequency of the source while it was measured [Hz].
    """

    lines: tuple[Fraction, ...]
    levels: tuple[float, ...]
    in_dbm: bool
    carrier_dbm: float | None
    source_hz: float


@dataclass(frozen=True)
class ComparedLine:
    """One measured line.

    Attributes
    ----------
    computed_dbc : float
        Middle of what random phases give [dBc].
    phases_dbc : (float, float)
        What nine tenths of random phases stay between [dBc].
    explained_dbc : float
        The middle under the best explanation.
    """

    line: Fraction
    frequency_hz: float
    measured_dbc: float
    computed_dbc: float
    phases_dbc: tuple[float, float]
    explained_dbc: float


@dataclass(frozen=True)
class Explanation:
    """One change and how well it explains what was measured.

    Attributes
    ----------
    stage : str or None
        Its name; None for the source.
    amount : float
        A fraction for a filter that moved; else dB.
    gained : float
        Misfit that it takes away: twice the log of how much likelier it makes what was measured.
    rms_db : float
        Of the differences left from the middle of what is expected [dB].
    """

    text: str
    stage: str | None
    part: Part
    amount: float
    gained: float
    rms_db: float


@dataclass(frozen=True)
class Comparison:
    """Measured against computed.

    Attributes
    ----------
    lines : tuple of ComparedLine
    rms_db : float
        Of the differences without any change [dB].
    explanations : tuple of Explanation
        Best first.
    told : bool
        Whether one of them stands out.
    findings : tuple of str
        What this says, in sentences.
    notes : tuple of str
        How it was compared.
    """

    lines: tuple[ComparedLine, ...]
    rms_db: float
    explanations: tuple[Explanation, ...]
    told: bool
    findings: tuple[str, ...]
    notes: tuple[str, ...]


def compare(scenario: Scenario, measured: MeasuredLines) -> Comparison:
    """Compare lines measured at the output with computed ones.

    Parameters
    ----------
    scenario : Scenario
        Without a filter to be planned.
    measured : MeasuredLines

    Returns
    -------
    Comparison

    Raises
    ------
    PlannerError
        Where there is no line to compare, or the scenario cannot be used.

    Notes
    -----
    What to expect is run exactly, by one-period sampling over random phases, amplifiers saturating; a change shifts it
    by as much as it shifts the linear sums of powers. One change at a time is tried.
    """
    if not measured.lines:
        raise PlannerError("no line was measured beside the carrier; at least one is needed")
    refuse_unplanned(scenario)
    bench = _bench(asking_nothing(scenario), measured.source_hz)
    levels = _carrier_levels(bench)
    carrier_dbm, said = _carrier(float(levels[-1].output_dbm[0]), measured)
    measured_db = np.array(measured.levels) - (carrier_dbm if measured.in_dbm else 0.0)
    where = np.array([bench.chain.grid.index(k) for k in measured.lines], dtype=np.intp)
    drawn_db = _drawn_db(bench, levels)
    middle_db = np.median(drawn_db, axis=0)
    readings = Readings(where, measured_db, drawn_db[:, where], _deviation_db(bench)[where])
    named = list(suspects(bench))
    fits = explain(readings, [n.suspect for n in named])
    unchanged = float(readings.misfit(np.zeros((1, bench.chain.grid.count)))[0])

    def rms_db(shift_db: Array) -> float:
        return float(np.sqrt(np.mean((measured_db - (middle_db + shift_db)[where]) ** 2)))

    explanations = [
        Explanation(
            text=_words(named[f.suspect], f.amount),
            stage=None if named[f.suspect].stage < 0 else scenario.stages[named[f.suspect].stage].name,
            part=named[f.suspect].part,
            amount=f.amount,
            gained=unchanged - f.misfit,
            rms_db=rms_db(f.shift_db),
        )
        for f in fits
    ]
    differing_db = rms_db(np.zeros_like(middle_db))
    told, findings = _findings(bench, readings, middle_db, differing_db, fits, explanations)
    low_db, high_db = np.quantile(drawn_db, (0.05, 0.95), axis=0)
    return Comparison(
        lines=tuple(
            ComparedLine(
                line=k,
                frequency_hz=float(k) * measured.source_hz,
                measured_dbc=float(measured_db[j]),
                computed_dbc=float(middle_db[where[j]]),
                phases_dbc=(float(low_db[where[j]]), float(high_db[where[j]])),
                explained_dbc=float((middle_db + fits[0].shift_db)[where[j]]),
            )
            for j, k in enumerate(measured.lines)
        ),
        rms_db=differing_db,
        explanations=tuple(explanations[:_SHOWN]),
        told=told,
        findings=findings,
        notes=(
            f"computed at a source of {measured.source_hz / 1e6:.9g} MHz, filters in the middle of their drift, over "
            f"{DRAWS} random phases (seed {SEED}), amplifiers saturating: what to expect, not the worst case of the "
            f"margins; a reading is taken to be {MEASUREMENT_DB:g} dB uncertain (memory)",
            *said,
        ),
    )


def _bench(scenario: Scenario, source_hz: float) -> Bench:
    """Return the chain at one frequency of its source, adding powers."""
    chain = assemble(scenario, phases="average")
    jobs = make_jobs(scenario, chain)
    settled = settle(chain, jobs, [0.0] * len(jobs))
    middle_hz = sum(scenario.source.frequency_hz) / 2
    bench = Bench(scenario, chain, jobs, settled.filters, source_hz / middle_hz)
    return replace(bench, chain=at_levels(scenario, chain, _carrier_levels(bench)))


def _carrier_levels(bench: Bench) -> tuple[CarrierLevels, ...]:
    """Return the carrier's levels along the chain."""
    losses = []
    for job, placed in zip(bench.jobs, bench.filters, strict=True):
        at_hz = np.array([job.centre_hz * bench.at])
        losses.append(np.zeros(1) if placed.attenuation is None else placed.attenuation(at_hz))
    return carrier_levels(bench.scenario, losses)


def _carrier(computed_dbm: float, measured: MeasuredLines) -> tuple[float, tuple[str, ...]]:
    """Return the carrier's level [dBm] that measured levels are relative to, and what to say of it."""
    if measured.carrier_dbm is not None:
        off_db = measured.carrier_dbm - computed_dbm
        return measured.carrier_dbm, (
            f"the carrier was measured at {measured.carrier_dbm:.1f} dBm, {abs(off_db):.1f} dB "
            f"{'above' if off_db > 0 else 'below'} the computed {computed_dbm:.1f} dBm",
        )
    if measured.in_dbm:
        return computed_dbm, (f"no carrier was measured: levels are relative to the computed {computed_dbm:.1f} dBm",)
    return computed_dbm, ()


def _drawn_db(bench: Bench, levels: Sequence[CarrierLevels]) -> Array:
    """Return the lines at the output over random phases, run exactly [dBc], (draws, lines)."""
    chain, rng = bench.chain, np.random.default_rng(SEED)
    stages = exact_stages(bench.scenario, chain, (0.0,) * len(chain.stages))
    passed = [t ** (1 / chain.exponent) for t in bench.transmissions]
    drive_db = amplifier_drive_db(bench.scenario, 1, levels)[:, 0]
    source = chain.source ** (1 / chain.exponent)
    drawn = []
    for start in range(0, DRAWS, _BLOCK):
        entering = source * random_phases(rng, (min(_BLOCK, DRAWS - start), chain.grid.count))
        entering[:, chain.grid.q - 1] = 1.0
        drawn.append(np.abs(combs_of(stages, entering, passed, drive_db, rng)[-1]))
    with np.errstate(divide="ignore"):
        return np.asarray(np.maximum(20 * np.log10(np.concatenate(drawn)), FAINTEST_DBC))


def _deviation_db(bench: Bench) -> Array:
    """Return what is uncertain of each line beside phases: reading, mismatch and termination [dB], (lines,)."""
    chain = bench.chain
    nominal = propagate(chain, bench.transmissions)[-1].leaving
    allowed = propagate(chain, bench.transmissions, allowed=True)[-1].leaving
    raised = np.divide(allowed, nominal, out=np.ones_like(allowed), where=nominal > 0)
    allowance_db = chain.to_db(raised) / np.sqrt(3)  # as of a uniform spread up to the allowance
    return np.asarray(np.sqrt(MEASUREMENT_DB**2 + allowance_db**2))


def _words(named: Named, amount: float) -> str:
    """Put a change into words."""
    written = {
        "percent": f"{100 * amount:+.1f} %".replace("-", "−"),
        "more": f"{abs(amount):.1f} dB {_comparative(named.part, amount)}",
        "level": f"{amount:.0f} dB",
    }[named.shown]
    return named.words.format(amount=written)


def _comparative(part: Part, amount: float) -> str:
    if part == "filter":
        return "more" if amount > 0 else "less"
    return "higher" if amount > 0 else "lower"


def _findings(
    bench: Bench,
    readings: Readings,
    middle_db: Array,
    rms_db: float,
    fits: Sequence[Fit],
    explanations: Sequence[Explanation],
) -> tuple[bool, tuple[str, ...]]:
    """Say what the ranking means, and where it says nothing."""
    grid, count, best = bench.chain.grid, len(readings.where), explanations[0]
    lines = "the measured line" if count == 1 else f"the {count} measured lines"
    differ = f"{lines} differ{'s' * (count == 1)} from the middle of what is computed by {rms_db:.1f} dB rms"
    left = [grid.line(int(readings.where[j])) for j in readings.unexplained(fits[0].shift_db)]
    if best.gained < CHANGED:
        if not len(readings.unexplained(np.zeros_like(middle_db))):
            hint = f"; a hint, no more: {best.text}" if best.gained > HINT else ""
            return False, (f"nothing needs explaining: {differ}, as phases and readings may{hint}",)
        return False, (f"no one change explains it: {differ}",)
    if 2 * len(left) > count:
        return False, (
            f"no one change explains it: {differ}, and the nearest, that {best.text}, leaves {best.rms_db:.1f} dB rms; "
            "perhaps more than one thing is different",
        )
    rivals = [i for i in range(1, len(fits)) if fits[i].misfit - fits[0].misfit < APART]
    comes = "nearest comes this" if rivals else "best explained by this"
    found = [f"{differ}; {comes}: {best.text}, which leaves {best.rms_db:.1f} dB rms"]
    if left:
        found.append(f"it leaves line{'s' * (len(left) > 1)} {', '.join(map(str, left))} unexplained")
    if rivals:
        others = "; ".join(f"{explanations[i].text} ({explanations[i].rms_db:.1f} dB)" for i in rivals[: _SHOWN - 1])
        more = f"; and {len(rivals) - _SHOWN + 1} more" if len(rivals) >= _SHOWN else ""
        found.append(f"but these lines cannot tell it from: {others}{more}")
        found += _telling(bench, readings, middle_db + fits[0].shift_db, middle_db + fits[rivals[0]].shift_db)
    return not rivals, tuple(found)


def _telling(bench: Bench, readings: Readings, one_db: Array, other_db: Array) -> list[str]:
    """Name the line not measured yet that would tell two explanations apart."""
    unmeasured = np.ones(bench.chain.grid.count, dtype=bool)
    unmeasured[readings.where] = False
    unmeasured[bench.chain.stages[-1].carrier] = False
    at = telling_line(one_db, other_db, unmeasured, faintest_db=_TELLING_DBC)
    if at is None or abs(one_db[at] - other_db[at]) <= _TELLING_DB:
        return []
    line = bench.chain.grid.line(at)
    return [f"line {line} would tell the first two apart: {one_db[at]:.0f} against {other_db[at]:.0f} dBc"]
