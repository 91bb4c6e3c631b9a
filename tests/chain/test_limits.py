"""Limits at a node: masks over frequency and offset, absolute limits, category A; expected values worked by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.chain.limits import limits_dbc
from harmonic_planner.model import Limits, MaskBand, OffsetBand, Output

CARRIER = (240.0, 240.0)


def _limit(
    limits: Limits, low: float, high: float | None = None, *, carrier: tuple[float, float] = CARRIER, dbm: float = 0.0
) -> float:
    ends = {"low_hz": np.array([low]), "high_hz": np.array([low if high is None else high])}
    return float(limits_dbc(limits, **ends, carrier_hz=carrier, carrier_dbm=dbm)[0])


def test_a_mask_replaces_the_limit_inside_its_band_only() -> None:
    output = Output(limit_dbc=-60.0, mask=(MaskBand(100.0, 200.0, -40.0), MaskBand(200.0, 300.0, -80.0)))
    assert _limit(output, 150, 160) == -40  # looser inside a band
    assert _limit(output, 250, 260) == -80
    assert _limit(output, 190, 210) == -80  # the strictest of both bands, which cover the span
    assert _limit(output, 90, 110) == -60  # partly outside: the general limit counts too
    assert _limit(output, 400, 400) == -60


def test_a_mask_alone_asks_nothing_outside_its_bands() -> None:
    assert _limit(Output(mask=(MaskBand(100.0, 200.0, -40.0),)), 300) == math.inf


def test_an_offset_mask_holds_on_both_sides_of_the_carrier() -> None:
    limits = Limits(limit_dbc=-50.0, offset_mask=(OffsetBand(10.0, 30.0, -70.0),))
    assert [_limit(limits, f) for f in (220, 260, 210, 270)] == [-70, -70, -70, -70]  # 20 and 30 off; edges are inside
    assert [_limit(limits, f) for f in (200, 280, 235)] == [-50, -50, -50]  # 40 and 5 off


def test_an_offset_grows_with_the_source_as_the_line_and_the_carrier_do() -> None:
    # source 19 to 21: line 11 lies one line, 19 to 21 Hz, from the carrier, line 12; line 10 lies 38 to 42 Hz from it
    carrier = (228.0, 252.0)
    limits = Limits(limit_dbc=-50.0, offset_mask=(OffsetBand(0.0, 20.0, -30.0), OffsetBand(40.0, 100.0, -80.0)))
    assert _limit(limits, 209, 231, carrier=carrier) == -50  # beyond 20 Hz off the general limit counts
    assert _limit(limits, 190, 210, carrier=carrier) == -80  # 42 Hz off, and 38 Hz outside both bands
    wider = Limits(limit_dbc=-50.0, offset_mask=(OffsetBand(0.0, 21.0, -30.0),))
    assert _limit(wider, 209, 231, carrier=carrier) == -30


def test_bands_of_both_masks_cover_a_span_together() -> None:
    # line 11 again: up to a source of 20 its frequency is in the first mask, from 20 on its offset is in the second
    limits = Limits(
        limit_dbc=-90.0, mask=(MaskBand(200.0, 220.0, -40.0),), offset_mask=(OffsetBand(20.0, 30.0, -45.0),)
    )
    assert _limit(limits, 209, 231, carrier=(228.0, 252.0)) == -45
    gap = Limits(limit_dbc=-90.0, mask=(MaskBand(200.0, 219.0, -40.0),), offset_mask=limits.offset_mask)
    assert _limit(gap, 209, 231, carrier=(228.0, 252.0)) == -90


def test_where_masks_meet_the_strictest_holds() -> None:
    limits = Limits(
        limit_dbc=-50.0, mask=(MaskBand(200.0, 300.0, -60.0),), offset_mask=(OffsetBand(10.0, 30.0, -55.0),)
    )
    assert _limit(limits, 260) == -60
    assert _limit(limits, 280) == -60


def test_an_absolute_limit_is_below_the_carrier_by_both_levels_and_stands_inside_masks() -> None:
    limits = Limits(limit_dbm=-30.0, limit_dbc=-40.0, mask=(MaskBand(100.0, 200.0, -20.0),))
    assert _limit(limits, 150, dbm=13.2) == pytest.approx(-43.2)
    assert _limit(limits, 250, dbm=13.2) == pytest.approx(-43.2)
    assert _limit(limits, 250, dbm=5.0) == -40
    assert _limit(limits, 150, dbm=5.0) == pytest.approx(-35)
    assert _limit(Limits(limit_dbm=-30.0), 150, dbm=5.0) == pytest.approx(-35)


def test_category_a_is_the_general_limit_at_the_carrier_s_power() -> None:
    limits = Limits(sm329_category_a=True, mask=(MaskBand(100.0, 200.0, -20.0),))
    assert _limit(limits, 250, dbm=30.0) == pytest.approx(-43)  # 1 W
    assert _limit(limits, 250, dbm=60.0) == pytest.approx(-70)  # 1 kW: 73 dB, of which 70 is less stringent
    assert _limit(limits, 150, dbm=30.0) == -20


@given(
    carrier=st.integers(2, 30),
    line=st.integers(1, 60),
    low=st.floats(1e6, 1e8),
    share=st.floats(1.0, 1.5),
    edges=st.lists(st.tuples(st.floats(0, 3e9), st.floats(1.0, 5e8), st.floats(-90, -20)), max_size=3),
    offsets=st.lists(st.tuples(st.floats(0, 3e9), st.floats(1.0, 5e8), st.floats(-90, -20)), max_size=3),
)
def test_no_point_of_the_span_asks_for_more(
    carrier: int,
    line: int,
    low: float,
    share: float,
    edges: list[tuple[float, float, float]],
    offsets: list[tuple[float, float, float]],
) -> None:
    """Independent: the limit at each of 2,001 source frequencies by itself."""
    if line == carrier:
        return
    limits = Limits(
        limit_dbc=-55.0,
        mask=tuple(MaskBand(a, a + w, x) for a, w, x in edges),
        offset_mask=tuple(OffsetBand(a, a + w, x) for a, w, x in offsets),
    )
    source = np.linspace(low, low * share, 2001)
    found = limits_dbc(
        limits,
        low_hz=np.array([line * low]),
        high_hz=np.array([line * low * share]),
        carrier_hz=(carrier * low, carrier * low * share),
        carrier_dbm=0.0,
    )[0]
    f, off = line * source, abs(line - carrier) * source
    here = np.full(source.shape, np.inf)
    for values, bands in ((f, limits.mask), (off, limits.offset_mask)):
        for band in bands:
            inside = (values >= band.low_hz) & (values <= band.high_hz)
            here = np.where(inside, np.minimum(here, band.limit_dbc), here)
    assert found <= np.where(np.isinf(here), -55.0, here).min()
    known = {-55.0, *(b.limit_dbc for b in (*limits.mask, *limits.offset_mask))}
    assert found in known
