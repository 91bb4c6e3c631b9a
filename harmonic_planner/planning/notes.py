"""What a plan says in words beside its numbers: warnings, assumptions, cautions."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from harmonic_planner.chain.assemble import ChainArrays
from harmonic_planner.chain.levels import CarrierLevels
from harmonic_planner.chain.limits import general_limit_dbc
from harmonic_planner.chain.propagate import Comb, carrier_spread
from harmonic_planner.chain.second_order import needs_exact
from harmonic_planner.model import Scenario
from harmonic_planner.physics.conversion import check_device
from harmonic_planner.planning.jobs import Job

_OUTPUT_TOLERANCE_DB = 2.0
_POWER_CAUTION_DBM = 30.0
_SPREAD_WARNING_DB = 0.5


def warnings_for(
    scenario: Scenario,
    chain: ChainArrays,
    jobs: Sequence[Job],
    levels: Sequence[CarrierLevels],
    combs: Sequence[Comb],
) -> tuple[str, ...]:
    """Return what the user should look at, in the order of the chain."""
    found = []
    if not scenario.source.lines_dbc:
        found.append("source.lines: none given, and a real source has harmonics")
    for stage, job, level in zip(scenario.stages, jobs, levels, strict=True):
        device = stage.device
        if device is not None:
            found += [f"{stage.name}: {text}" for text in check_device(device, stage.times)]
            if device.drive_dbm is not None:
                low, high = device.drive_dbm
                least, most = float(level.drive_dbm.min()), float(level.drive_dbm.max())
                if least < low:
                    found.append(f"{stage.name}: driven with {least:.1f} dBm, {low - least:.1f} dB more gain is needed")
                if most > high:
                    found.append(f"{stage.name}: driven with {most:.1f} dBm, {most - high:.1f} dB more pad is needed")
        if stage.filter == "plan" and stage.design.min_bandwidth is not None:
            floor = job.kit.bandwidth_floor(tuned=stage.design.tuned, drift=stage.design.drift)
            if stage.design.min_bandwidth < floor:
                found.append(
                    f"{stage.name}: min_bandwidth = {stage.design.min_bandwidth:.1%} is below the {floor:.1%} that the "
                    f"tolerance of {job.kit.name} parts asks for"
                )
        amplifier = stage.amplifier
        if amplifier is not None and amplifier.saturation_dbm is not None:
            asked = float(level.amplifier_input_dbm.max()) + amplifier.gain_db
            if asked > amplifier.saturation_dbm:
                found.append(
                    f"{stage.name}: the amplifier is driven {asked - amplifier.saturation_dbm:.1f} dB into saturation; "
                    "lines are carried as if it were linear"
                )
    wanted = scenario.output.level_dbm
    if wanted is not None:
        low, high = float(levels[-1].output_dbm.min()), float(levels[-1].output_dbm.max())
        off = max(wanted - low, high - wanted)
        if off > _OUTPUT_TOLERANCE_DB:
            found.append(f"output.level = {wanted:g} dBm is asked, {low:.1f} to {high:.1f} dBm come out")
    found += [
        f"{scenario.stages[x.stage].name}: residuals of {x.residuals_dbc:.1f} dBc in all at its input can make "
        f"lines of second order up to {x.level_dbc:.1f} dBc at the output, which the linear sums leave out"
        for x in needs_exact(scenario, chain, combs)
    ]
    for stage, spread in zip(scenario.stages, carrier_spread(chain, combs), strict=True):
        spread_db = -20 * np.log10(max(1 - spread ** (1 / chain.exponent), 1e-3))
        if spread_db > _SPREAD_WARNING_DB:
            found.append(
                f"{stage.name}: residuals that land on the carrier spread its level by up to {spread_db:.1f} dB"
            )
    return tuple(found)


def assumptions_for(scenario: Scenario, chain: ChainArrays, jobs: Sequence[Job]) -> tuple[str, ...]:
    """Return every default and simplification that shaped the plan."""
    found = list(scenario.defaults)
    for stage, arrays, job in zip(scenario.stages, chain.stages, jobs, strict=True):
        allowed = arrays.allowance
        if stage.filter != "none":
            found.append(
                f"{stage.name}: mismatch {allowed.mismatch_db:.1f} dB ({allowed.before.name} |Γ| "
                f"{allowed.before.reflection:g} behind {allowed.before.pad_db:g} dB, {allowed.after.name} |Γ| "
                f"{allowed.after.reflection:g} behind {allowed.after.pad_db:g} dB), "
                f"termination {allowed.termination_db:.1f} dB"
            )
        if stage.filter == "plan":
            origin = "given" if stage.design.unloaded_q else f"of {job.kit.name} resonators (memory)"
            found.append(f"{stage.name}: windows with an unloaded Q of {job.unloaded_q:.0f}, {origin}")
        if stage.amplifier is not None:
            found.append(f"{stage.name}: the amplifier's gain is taken as flat over all lines")
            if stage.amplifier.saturation_dbm is None:
                found.append(f"{stage.name}: the amplifier is taken as linear, no saturation given")
            if not stage.amplifier.lines_dbc:
                found.append(f"{stage.name}: the amplifier is taken to make no lines of its own")
    found.append(f"lines are carried up to {float(chain.grid.line(chain.grid.count - 1)):g} times the source")
    if any(np.isfinite(stage.design.isolation.level_db) for stage in scenario.stages):
        found.append(
            "leakage is counted past each filter, and from the source's and every earlier stage's carrier, where it is "
            "strongest, to every later input and to the output, by the isolation of the stage that it reaches"
        )
    found.append("element values are ideal, with the kit's losses; strays are judged part by part")
    return tuple(found)


def notes_on_limits(scenario: Scenario, levels: Sequence[CarrierLevels]) -> tuple[str, ...]:
    """Say what limits that depend on the carrier's level come to."""
    found = []
    last = len(levels) - 1
    places = [(f"stage[{i + 1}].tap", stage.tap, i) for i, stage in enumerate(scenario.stages)]
    for place, limits, i in (*places, ("output", scenario.output, last)):
        if limits is None:
            continue
        carrier_dbm = float(np.max(levels[i].output_dbm))
        carrier = f"the carrier being {carrier_dbm:.1f} dBm"
        if limits.limit_dbm is not None:
            absolute_dbc = limits.limit_dbm - carrier_dbm
            found.append(f"{place}.limit_dbm = {limits.limit_dbm:g} dBm is {absolute_dbc:.1f} dBc, {carrier}")
        if limits.sm329_category_a:
            found.append(
                f"{place}.limit: Recommendation ITU-R SM.329, category A, 43 + 10 log10 P dB or 70 dBc, whichever is "
                f"less stringent (memory), is {general_limit_dbc(limits, carrier_dbm):.1f} dBc, {carrier}; it governs "
                "emission at an antenna, and local rules come first"
            )
    return tuple(found)


def cautions_for(levels: Sequence[CarrierLevels]) -> tuple[str, ...]:
    """Return the usual cautions where power is high."""
    highest = max((float(level.output_dbm.max()) for level in levels), default=-np.inf)
    if highest <= _POWER_CAUTION_DBM:
        return ()
    return (
        f"the chain carries up to {highest:.0f} dBm: RF burns and exposure limits apply; follow local codes and have "
        "licensed practice check shielding and any radiated emission before power is applied",
    )
