"""E series against IEC 60063, "Preferred number series for resistors and capacitors"."""

import pytest

from harmonic_planner.parts.preferred import SERIES

# published: E24 departs from the rounded 10^(k/24) at these places only, IEC 60063 (memory)
E24_EXCEPTIONS = {10: 2.7, 11: 3.0, 12: 3.3, 13: 3.6, 14: 3.9, 15: 4.3, 16: 4.7, 22: 8.2}


@pytest.mark.published
def test_e24_is_the_rounded_geometric_series_with_its_eight_historical_exceptions():
    expected = [E24_EXCEPTIONS.get(k, round(10 ** (k / 24), 1)) for k in range(24)]
    assert list(SERIES["E24"]) == expected


@pytest.mark.published
@pytest.mark.parametrize("n", [48, 96])
def test_e48_and_e96_are_the_geometric_series_rounded_to_three_digits(n: int):
    assert list(SERIES[f"E{n}"]) == [round(10 ** (k / n), 2) for k in range(n)]


@pytest.mark.published
def test_e12_e6_and_e3_as_printed():
    # published: IEC 60063, series E12, E6, E3 (memory)
    assert SERIES["E12"] == (1.0, 1.2, 1.5, 1.8, 2.2, 2.7, 3.3, 3.9, 4.7, 5.6, 6.8, 8.2)
    assert SERIES["E6"] == (1.0, 1.5, 2.2, 3.3, 4.7, 6.8)
    assert SERIES["E3"] == (1.0, 2.2, 4.7)


@pytest.mark.parametrize("name", list(SERIES))
def test_each_series_has_as_many_numbers_a_decade_as_its_name_says(name: str):
    numbers = SERIES[name]
    assert len(numbers) == int(name[1:])
    assert numbers[0] == 1.0
    assert numbers[-1] < 10.0
    assert list(numbers) == sorted(set(numbers))
