"""Two figures for every stage, its comb and its filter's response; one of resonators against bandwidth.

A drawing function takes a series and an Axes, draws, and computes nothing. Colours are those of Okabe and Ito (Color
Universal Design, 2008), which colour-blind readers can tell apart; each thing also has a marker or a hatch of its own.
"""

import io
import warnings
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import LogLocator, NullFormatter

from harmonic_planner.export.names import stage_stem
from harmonic_planner.model import Plan, TradePoint
from harmonic_planner.report import series
from harmonic_planner.report.series import Comb, Mark, Response
from harmonic_planner.report.text import decibels

BLACK, ORANGE, BLUE, GREEN, VERMILLION = "#000000", "#E69F00", "#0072B2", "#009E73", "#D55E00"

_STYLE: Mapping[Any, Mapping[str, Any]] = {  # matplotlib types its group names, by version
    "font": {"family": "DejaVu Sans", "size": 9.0},
    "axes": {"titlesize": 10.0, "grid": True, "axisbelow": True},
    "grid": {"color": "#dddddd", "linewidth": 0.6},
    "hatch": {"linewidth": 0.6},
    "legend": {"fontsize": 8.0, "frameon": False},
    "text": {"parse_math": False},
}


def draw_comb(comb: Comb, axes: Axes) -> None:
    """Draw a stage's lines before and after its filter, with what is allowed there.

    Parameters
    ----------
    comb : Comb
        The lines, in the units of the axes.
    axes : Axes
        An empty pair of axes.
    """
    floor = comb.y_min_dbc
    axes.set_title(comb.title)
    axes.set_xlabel(f"Frequency ({comb.unit})")
    axes.set_ylabel("Level (dBc)")
    axes.set_xlim(0, comb.x_max)
    axes.set_ylim(floor, comb.y_max_dbc)
    _stems(axes, comb.before, floor, color=ORANGE, marker="o", filled=False, label="before the filter")
    _stems(axes, comb.after, floor, color=BLUE, marker="s", filled=True, label="stage output (after filter, amplifier)")
    _bars(axes, comb.allowed, color=GREEN, marker="v", label="allowed by the budget")
    _bars(axes, comb.limits, color=BLACK, marker="_", label="limit")
    _stems(
        axes, (comb.carrier,), floor, color=BLACK, marker="D", filled=True, label=f"carrier (line {comb.carrier.name})"
    )
    for mark in comb.named:
        _name(axes, mark.name, mark.middle, mark.level_dbc)
    _legend(axes)


def draw_response(response: Response, axes: Axes) -> None:
    """Draw a filter's attenuation with the rejection required at each unwanted line.

    Parameters
    ----------
    response : Response
        The curve and the requirements, in the units of the axes.
    axes : Axes
        An empty pair of axes.
    """
    axes.set_title(f"{response.title}\n{response.note}")
    axes.set_xlabel(f"Frequency ({response.unit})")
    axes.set_ylabel("Attenuation relative to midband (dB)")
    if response.logarithmic:
        axes.set_xscale("log")
        axes.xaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
        axes.xaxis.set_major_formatter("{x:g}")
        axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xlim(*response.x_range)
    axes.set_ylim(response.y_max_db, -5.0)
    if response.frequency:
        axes.plot(response.frequency, response.attenuation_db, color=BLUE, linewidth=1.4, label="as built")
    axes.axvspan(*response.carrier, facecolor="none", edgecolor=GREEN, hatch="....", linewidth=1.0, label="carrier")
    for position, need in enumerate(response.needs):
        axes.add_patch(
            Rectangle(
                (need.low, 0.0),
                need.high - need.low,
                need.required_db,
                facecolor="none",
                edgecolor=VERMILLION,
                hatch="////",
                linewidth=1.6,
                label="rejection required, over the line's span" if position == 0 else "_",
            )
        )
        if need.named:
            _name(axes, need.name, (need.low + need.high) / 2, 0.0)
    for met, marker, color, label in (
        (True, "o", BLUE, "as built at that line: worst of span, drift, leakage"),
        (False, "X", VERMILLION, "the same, less than required"),
    ):
        chosen = [need for need in response.needs if need.met is met]
        if chosen:
            axes.plot(
                [(need.low + need.high) / 2 for need in chosen],
                [need.shown_db for need in chosen],
                linestyle="none",
                marker=marker,
                color=color,
                markersize=5,
                clip_on=False,
                label=label,
            )
    _legend(axes)


def draw_trade(points: Sequence[TradePoint], axes: Axes) -> None:
    """Draw the widest common bandwidth against the count of resonators.

    Parameters
    ----------
    points : sequence of TradePoint
        At least one.
    axes : Axes
        An empty pair of axes.
    """
    totals = [point.total for point in points]
    percent = [100 * point.bandwidth for point in points]
    axes.set_title("Resonators against bandwidth")
    axes.set_xlabel("Resonators in all stages")
    axes.set_ylabel("Every bandpass at least so wide (% of its centre)")
    axes.set_xlim(totals[0] - 0.5, totals[-1] + 0.5)
    axes.set_ylim(0.0, 1.25 * max(percent))
    axes.set_xticks(totals)
    axes.plot(totals, percent, color=BLUE, marker="o", linewidth=1.4, label="widest common bandwidth")
    for point, height in zip(points, percent, strict=True):
        by_stage = " + ".join(str(n) for n in point.resonators)
        _name(axes, f"{by_stage}\nmargin {decibels(point.margin_db)} dB", point.total, height)
    _legend(axes)


def trade_figure(plan: Plan) -> dict[str, bytes]:
    """Draw ``trade.png``, if the plan has a trade; the same plan gives the same bytes."""
    if not plan.trade:
        return {}
    with _plain_style():
        figure, axes = _new_figure()
        draw_trade(plan.trade, axes)
        return {"trade.png": _png(figure)}


def stage_figures(plan: Plan) -> dict[str, bytes]:
    """Draw every stage's two figures.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    dict of str to bytes
        File name and PNG image; the same plan gives the same bytes.
    """
    files: dict[str, bytes] = {}
    with _plain_style():
        for index, stage in enumerate(plan.stages):
            stem = stage_stem(index + 1, stage.name)
            figure, axes = _new_figure()
            draw_comb(series.comb(plan, index), axes)
            files[f"{stem}_comb.png"] = _png(figure)
            figure, axes = _new_figure()
            draw_response(series.response(plan, index), axes)
            files[f"{stem}_response.png"] = _png(figure)
    return files


@contextmanager
def _plain_style() -> Iterator[None]:
    """Draw in our style alone, whatever the user's own settings are."""
    with mpl.rc_context(), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")  # a name in a script the font lacks
        mpl.rcdefaults()
        for group, settings in _STYLE.items():
            mpl.rc(group, **settings)
        yield


def _new_figure() -> tuple[Figure, Axes]:
    """Make a figure that no global state knows of, with one pair of axes."""
    figure = Figure(figsize=(8.0, 4.8), dpi=120)
    FigureCanvasAgg(figure)
    figure.subplots_adjust(left=0.09, right=0.98, top=0.89, bottom=0.23)
    return figure, figure.add_subplot()


def _png(figure: Figure) -> bytes:
    """Render a figure without date or program in the file."""
    buffer = io.BytesIO()
    figure.savefig(buffer, format="png", metadata={"Software": None})
    return buffer.getvalue()


def _stems(
    axes: Axes, marks: tuple[Mark, ...], floor: float, *, color: str, marker: str, filled: bool, label: str
) -> None:
    """Draw lines that rise from the floor to their level."""
    if not marks:
        return
    middles = [mark.middle for mark in marks]
    levels = [mark.level_dbc for mark in marks]
    axes.vlines(middles, floor, levels, colors=color, linewidth=1.8 if filled else 1.0)
    axes.plot(
        middles,
        levels,
        linestyle="none",
        marker=marker,
        markersize=4.5 if filled else 7.0,
        color=color,
        markerfacecolor=color if filled else "white",
        label=label,
    )


def _bars(axes: Axes, marks: tuple[Mark, ...], *, color: str, marker: str, label: str) -> None:
    """Draw levels that lines must stay under, over each line's span."""
    if not marks:
        return
    levels = [mark.level_dbc for mark in marks]
    axes.hlines(levels, [mark.low for mark in marks], [mark.high for mark in marks], colors=color, linewidth=1.4)
    axes.plot(
        [mark.middle for mark in marks],
        levels,
        linestyle="none",
        marker=marker,
        markersize=7,
        markeredgewidth=1.4,
        color=color,
        markerfacecolor="white",
        label=label,
    )


def _name(axes: Axes, name: str, x: float, y: float) -> None:
    """Write a line's harmonic number beside its mark."""
    axes.annotate(
        name,
        (x, y),
        xytext=(0, 4),
        textcoords="offset points",
        ha="center",
        va="bottom",
        fontsize=7,
        annotation_clip=True,
    )


def _legend(axes: Axes) -> None:
    """Explain the marks under the axes, where they hide nothing."""
    axes.legend(loc="upper center", bbox_to_anchor=(0.5, -0.14), ncols=3)
