"""The plan's lines, node by node along the chain."""

from collections.abc import Iterable, Iterator, Sequence
from fractions import Fraction

from harmonic_planner.model import LEAK_OF, LineLevel, Origin, Plan


def line_frequency_hz(plan: Plan, line: Fraction) -> tuple[float, float]:
    """Return the span that a line covers.

    Parameters
    ----------
    plan : Plan
        The plan; its first stage gives the source's frequencies.
    line : Fraction
        Harmonic number relative to the source.

    Returns
    -------
    tuple of float
        Lowest and highest frequency [Hz], rounded once.
    """
    first = plan.stages[0]
    low, high = (float(Fraction(edge) * line / first.line) for edge in first.frequency_hz)
    return low, high


def nodes(plan: Plan) -> Iterator[tuple[str, int | None, str, Sequence[LineLevel]]]:
    """Walk along the chain.

    Parameters
    ----------
    plan : Plan
        The plan.

    Yields
    ------
    tuple
        Node (``source``, ``multiplier output``, ``stage output``), stage's number from 1 (None at the source), stage's
        name, and the lines there.
    """
    yield "source", None, "source", plan.source_lines
    for number, stage in enumerate(plan.stages, start=1):
        yield "multiplier output", number, stage.name, stage.device_lines
        yield "stage output", number, stage.name, stage.output_lines


def origins_text(origins: Iterable[Origin], *, at_least: float = 0.0) -> str:
    """Say in words where a line comes from.

    Parameters
    ----------
    origins : iterable of Origin
        The contributions.
    at_least : float
        Contributions with a smaller share are left out [fraction].

    Returns
    -------
    str
        For instance ``line 3 left by first doubler (62 %); line 2 of the source (20 %)``, largest share first.
        Contributions of one stage by one line, as of its multiplier and its amplifier, are added.
    """
    shares: dict[tuple[str, Fraction], float] = {}
    for origin in origins:
        born = (origin.stage, origin.line)
        shares[born] = shares.get(born, 0.0) + origin.share
    return "; ".join(
        f"{_born(stage, line)} ({100 * share:.0f} %)"
        for (stage, line), share in sorted(shares.items(), key=lambda item: -item[1])
        if share >= at_least
    )


def _born(stage: str, line: Fraction) -> str:
    """Say where a line was born."""
    if stage == "source":
        return f"line {line} of the source"
    return f"line {line}, {stage}" if stage.startswith(LEAK_OF) else f"line {line} left by {stage}"
