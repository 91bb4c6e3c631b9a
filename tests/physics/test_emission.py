"""Category A of Recommendation ITU-R SM.329.

Published: 43 + 10 log10 P dB, or 70 dBc, whichever is less stringent (Recommendation ITU-R SM.329, "Unwanted emissions
in the spurious domain", table 2, category A, all services but those quoted there (memory)); levels worked by hand.
"""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.physics.emission import sm329_category_a_db


@pytest.mark.parametrize(
    "watts, attenuation_db",
    [
        (0.001, 13.0),
        (0.01, 23.0),
        (1.0, 43.0),
        (10.0, 53.0),
        (100.0, 63.0),
        (500.0, 69.99),
        (1000.0, 70.0),
        (1e6, 70.0),
    ],
)
def test_attenuation(watts: float, attenuation_db: float) -> None:
    assert sm329_category_a_db(10 * math.log10(watts) + 30) == pytest.approx(attenuation_db, abs=0.005)


@given(st.floats(-20, 56))
def test_up_to_500_w_it_is_minus_13_dbm(power_dbm: float) -> None:
    assert power_dbm - sm329_category_a_db(power_dbm) == pytest.approx(-13, abs=1e-9)
