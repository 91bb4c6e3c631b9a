"""Mismatch and termination: each figure worked out by hand from the formula in the module text."""

from dataclasses import replace

import pytest

from harmonic_planner.chain.allowances import allowance, mismatch_db, termination_db
from harmonic_planner.model import Amplifier

from builders import DESIGN, chain_of, with_amplifier


# independent: 1/(1 − 0.7), 1/(1 − 0.35083), 1/(1 − 0.17583) in dB, by hand
@pytest.mark.parametrize(("pad_db", "expected_db"), [(0.0, 10.458), (3.0, 3.753), (6.0, 1.680)])
def test_worst_case_mismatch_of_a_multiplier(pad_db: float, expected_db: float) -> None:
    assert mismatch_db(reflection=0.7, pad_db=pad_db, phases="worst-case") == pytest.approx(expected_db, abs=2e-3)


def test_average_mismatch_is_the_power_mean_of_the_multiple_reflections() -> None:
    # independent: mean over phase of 1/|1 − ρ e^(jψ)|² = 1/(1 − ρ²) (Poisson kernel), by quadrature
    import numpy as np

    rho = 0.7 * 10**-0.1
    psi = np.linspace(0, 2 * np.pi, 20000, endpoint=False)
    mean = np.mean(1 / np.abs(1 - rho * np.exp(1j * psi)) ** 2)
    assert mismatch_db(reflection=0.7, pad_db=1.0, phases="average") == pytest.approx(10 * np.log10(mean), abs=1e-9)


# common practice, no source: ±3 dB, ±1.5 dB with 3 dB, ±1 dB with 6 dB; between them a straight line
@pytest.mark.parametrize(("pad_db", "expected_db"), [(0, 3.0), (3, 1.5), (6, 1.0), (1.5, 2.25), (20, 1.0)])
def test_termination_by_pad(pad_db: float, expected_db: float) -> None:
    assert termination_db(pad_db) == pytest.approx(expected_db)


def test_both_sides_of_a_filter_count() -> None:
    scenario = chain_of(2, 3)
    inner = allowance(scenario, 0, "worst-case")
    assert inner.before.reflection == inner.after.reflection == 0.7
    assert inner.mismatch_db == pytest.approx(2 * 1.680, abs=4e-3)
    last = allowance(scenario, 1, "worst-case")
    assert last.after.name == "the load"
    assert last.mismatch_db == pytest.approx(1.680, abs=2e-3)


def test_an_amplifier_hides_what_is_behind_it() -> None:
    scenario = with_amplifier(chain_of(2, 3), 0, Amplifier(20.0))
    assert allowance(scenario, 0, "worst-case").after.reflection == 0.3


def test_a_clean_up_stage_sees_the_amplifier_before_it_and_has_no_termination() -> None:
    scenario = with_amplifier(chain_of(2, 1), 0, Amplifier(20.0))
    found = allowance(scenario, 1, "worst-case")
    assert (found.before.name, found.before.reflection) == ("the amplifier of stage 1", 0.3)
    assert found.termination_db == 0


def test_a_clean_up_stage_behind_a_filter_adds_the_pads_between() -> None:
    found = allowance(chain_of(2, 1), 1, "worst-case")
    assert (found.before.reflection, found.before.pad_db) == (0.9, 12.0)


def test_a_given_reflection_replaces_both_neighbours_and_zero_switches_off() -> None:
    for reflection in (0.0, 0.5):
        found = allowance(chain_of(2, 3, design=replace(DESIGN, reflection=reflection)), 0, "worst-case")
        assert found.before.reflection == found.after.reflection == reflection
        assert (found.mismatch_db == 0) == (reflection == 0)


def test_without_a_filter_nothing_is_reflective() -> None:
    found = allowance(chain_of(2, 3, filter="none"), 0, "worst-case")
    assert found.mismatch_db == found.termination_db == 0


def test_a_given_termination_replaces_the_one_by_pad() -> None:
    assert allowance(chain_of(2, design=replace(DESIGN, termination_db=0.3)), 0, "worst-case").termination_db == 0.3
