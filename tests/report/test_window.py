"""The answer at the bench: one sentence, windows, rejections, parts; 80 columns."""

import io
from dataclasses import replace
from pathlib import Path

import pytest
from rich.console import Console

from harmonic_planner.model import Window
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.bench import Answer, Asked
from harmonic_planner.planning.built import Form
from harmonic_planner.report.window import bought_parts, does_it, sentence, show_window

from plan_fixture import built, element

KIT = load_kit("chip-0603", Path())
BUTTER_3 = Prototype("butterworth", 3)
LINES = (Asked(120e6, 120e6, 45.0), Asked(359e6, 361e6, 40.0))
LACKS = "at 17.5 % bandwidth, the floor, the line at 120 MHz needs 45.0 dB and gets {} dB"
UNREALISED = "no allowed topology realises it between equal impedances"
WINDOWS = (
    Window("butterworth", 0.0, 1, 0.0, 0.0, 240e6, feasible=False, reason=LACKS.format(16.8)),
    Window("butterworth", 0.0, 2, 0.0, 0.0, 240e6, feasible=False, reason=LACKS.format(33.0)),
    Window("butterworth", 0.0, 3, 42e6, 64.2e6, 218e6, feasible=True, centre_min_hz=240e6),
    Window("chebyshev", 0.1, 1, 0.0, 0.0, 240e6, feasible=False, reason=LACKS.format(4.4)),
    Window("chebyshev", 0.1, 2, 42e6, 50e6, 220e6, feasible=True, reason=UNREALISED),
    Window("chebyshev", 0.1, 3, 42e6, 97e6, 213.1e6, feasible=True),
    Window("chebyshev", 0.1, 4, 42e6, 101e6, 213.0e6, feasible=True, reason=UNREALISED),
)
PARTS = (
    element("L1", "series", 99.5e-9, 75e-9),
    element("C1", "series", 5.17e-12, 5.1e-12),
    element("L2", "shunt", 5.36e-9, 5.1e-9, verdict="marginal", reason="strays 12 % (0.6 nH in 5.1 nH); x"),
    element("C2", "shunt", 96.1e-12, 82e-12, self_resonance_hz=662e6),
)


def made(*, parts=PARTS, topology="ladder-shunt", resonator=None, prototype=BUTTER_3):
    return built(
        prototype,
        Form(topology, KIT, 50.0, resonator),
        centre_hz=220e6,
        bandwidth=0.25,
        parts=parts,
        rejection_db=(46.6, 41.5),
    )


def answer(circuit=None, *, reason="ladder-shunt order 3 at 25%: all ok, 1.2 dB loss", windows=WINDOWS) -> Answer:
    return Answer(windows, circuit, reason, (46.6, 41.5))


def shown(found: Answer, lines=LINES) -> str:
    stream = io.StringIO()
    show_window(found, lines, Console(file=stream, width=80, highlight=False, markup=False, emoji=False))
    return stream.getvalue()


def section(text: str, title: str) -> list[str]:
    """Rows under a section's title, as words."""
    rows = text.splitlines()
    start = next(i for i, row in enumerate(rows) if row.startswith(title)) + 1
    end = next((i for i in range(start, len(rows)) if not rows[i].strip()), len(rows))
    return [" ".join(row.split()) for row in rows[start:end]]


def test_the_sentence_comes_first_and_says_filter_kit_band_and_what_it_does():
    text = " ".join(shown(answer(made())).split())
    assert text.startswith(
        "Butter 3 ladder-shunt of chip-0603, 25.0 % at 220 MHz, rejects every line as built, 1.5 dB to spare at the "
        "least, with 1.2 dB loss; 1 of 4 parts marginal (L2). Windows"
    )


@pytest.mark.parametrize(
    ("circuit", "words"),
    [
        (
            made(topology="capacitive", resonator=27e-9),
            "Butter 3 capacitive with 27 nH of chip-0603, 25.0 % at 220 MHz,",
        ),
        (made(topology="low-pass", prototype=Prototype("chebyshev", 5, 0.1)), "Cheb 5 low-pass of chip-0603, cut-off"),
        (made(parts=PARTS[:2]), "; all parts ok."),
        (made(parts=tuple(replace(p, verdict="swamped") for p in PARTS)), "4 of 4 parts swamped (L1, C1, L2, C2)."),
        (made(parts=tuple(replace(p, verdict="swamped") for p in PARTS * 2)), "8 of 8 parts swamped."),
    ],
)
def test_the_sentence_suits_the_circuit(circuit, words):
    assert words in sentence(answer(circuit), LINES)


def test_other_circuits_that_were_looked_at_are_said():
    reason = "capacitive order 3: 2 dB short; ladder-shunt order 3 at 25%: all ok"
    assert sentence(answer(made(), reason=reason), LINES).endswith(f" Why: {reason}.")


def test_a_filter_does_it_unless_there_is_none_or_a_part_is_swamped():
    assert does_it(answer(made()))
    assert not does_it(answer(None))
    assert not does_it(answer(made(parts=(replace(PARTS[0], verdict="swamped"),))))


def test_windows_are_shares_of_their_own_centres_and_hertz_and_the_chosen_one_is_marked():
    rows = section(shown(answer(made())), "Windows")
    assert rows[0] == "filter bandwidth % bandwidth MHz centre MHz"
    assert rows[2:4] == ["Butter 3 17.5–29.4 42–64.2 218 chosen", "Cheb 3 to 45.5 42–97 213.1"]


def test_orders_without_a_window_are_put_together_with_what_the_highest_lacks():
    text = " ".join(section(shown(answer(made())), "Windows"))
    assert f"- Butter 1 to 2 have none; order 2: {LACKS.format('33.0')}" in text
    assert f"- Cheb 1 has none: {LACKS.format(4.4)}" in text
    assert "16.8" not in text
    assert f"- Cheb 2, 4 have windows, but {UNREALISED}" in text


def test_a_low_pass_is_chosen_from_no_window():
    low_pass = made(topology="low-pass", prototype=BUTTER_3)
    assert "chosen" not in shown(answer(low_pass))


def test_where_nothing_does_it_the_reason_is_said_once_and_the_nearest_filters_rejections_are_shown():
    reason = "the line at 245 MHz overlaps the carrier (240 to 250 MHz) within the drift of 1 %"
    windows = tuple(replace(window, feasible=False, reason=reason) for window in WINDOWS)
    text = shown(Answer(windows, None, reason, ()))
    assert " ".join(text.split()) == (
        f"No filter does it: {reason}. Windows: bandwidths that pass the carrier and reject every line none"
    )
    near = shown(Answer(WINDOWS, None, "as built it is short", (46.6, 38.5)))
    assert section(near, "Rejection of the nearest filter")[-1] == "359–361 MHz 40.0 38.5 -1.5"
    assert "Parts" not in near


def test_rejections_stand_beside_what_is_required():
    assert section(shown(answer(made())), "Rejection")[2:] == ["120 MHz 45.0 46.6 +1.6", "359–361 MHz 40.0 41.5 +1.5"]


def test_parts_say_place_purchase_design_q_self_resonance_and_verdict():
    pair = replace(made(), parts=((75e-9,), (3.9e-12, 1.2e-12), (5.1e-9,), (82e-12,), (1e-9,), (1e-12,)))
    by_ref = {part.ref: part.bought for part in bought_parts(pair)}
    refs = [part.ref for part in pair.nominal.elements]
    assert [by_ref[ref] for ref in refs if ref in by_ref] == [
        values for ref, values in zip(refs, pair.parts, strict=True) if ref in by_ref
    ]
    rows = section(shown(answer(made())), "Parts of chip-0603")
    assert rows[0] == "part placed to buy ideal Q self-res. verdict"
    assert [row.split()[:2] for row in rows[2:6]] == [
        ["L1", "series"],
        ["C1", "series"],
        ["L2", "shunt"],
        ["C2", "shunt"],
    ]
    assert rows[5].endswith("96.1 pF 42 662 MHz ok")
    assert rows[6:] == ["- L2 marginal: strays 12 % (0.6 nH in 5.1 nH)"]


def test_parts_with_the_same_fault_are_named_together_with_the_numbers_of_the_worst():
    parts = [
        element(
            f"C{i}", "shunt", 1e-12, 1e-12, verdict="marginal", reason=f"self-resonance {r} GHz", self_resonance_hz=r
        )
        for i, r in ((1, 5.0), (2, 4.0), (3, 6.0))
    ]
    swamped = element(
        "L1", "shunt", 1e-9, 1e-9, verdict="swamped", reason="not available: 0.2 nH; self-resonance 1 GHz"
    )
    rows = section(shown(answer(made(parts=(*parts, swamped)))), "Parts of chip-0603")
    assert rows[-2:] == [
        "- L1 swamped: not available: 0.2 nH",
        "- C1, C2, C3 marginal: self-resonance 4.0 GHz (C2)",
    ]


@pytest.mark.parametrize("scale", [1.0, 10.0])
def test_it_fits_eighty_columns(scale):
    windows = tuple(
        replace(w, bandwidth_min_hz=w.bandwidth_min_hz * scale, bandwidth_max_hz=w.bandwidth_max_hz * scale)
        for w in WINDOWS
    )
    lines = tuple(Asked(line.low_hz * scale, line.high_hz * scale, 45.0) for line in LINES)
    assert max(map(len, shown(answer(made(), windows=windows), lines).splitlines())) <= 80


def test_text_from_a_kit_cannot_steer_the_terminal():
    hostile = replace(KIT, name="\x1b[2Jkit", title="\x07")
    circuit = replace(made(), form=Form("ladder-shunt", hostile, 50.0))
    text = shown(answer(circuit))
    assert "\x1b" not in text
    assert "\x07" not in text
