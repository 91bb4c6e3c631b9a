"""One filter, first as a sketch with ideal values and then as built: parts that exist, strays absorbed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from harmonic_planner.filters import flags
from harmonic_planner.filters.absorb import absorb
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.response import Response, sweep
from harmonic_planner.filters.snap import snap
from harmonic_planner.filters.topologies import REGISTRY, TopologyError
from harmonic_planner.model import VERDICT_RANK, ElementReport, ElementVerdict
from harmonic_planner.parts.kits import InductorKit, Kit
from harmonic_planner.parts.quantities import readable
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.jobs import Action, Array, Attenuation, Job, act

_MIDBAND_POINTS = 21
_MIDBAND_SHARE = 0.5
_WIDEST_MIDBAND = 0.5
_OFF_SHELF = 1.1


@dataclass(frozen=True)
class Form:
    """What a filter is made of, apart from its response: topology, parts, impedance, free resonator value.

    `resonator` is in henry or farad, as the topology's free element; None where nothing is free.
    """

    topology: str
    kit: Kit
    impedance_ohm: float
    resonator: float | None = None

    @property
    def resonator_text(self) -> str:
        """The free resonator value with its unit; empty where nothing is free."""
        free = REGISTRY[self.topology].free
        if self.resonator is None or free is None:
            return ""
        return readable(self.resonator, "H" if free == "L" else "F")


@dataclass(frozen=True)
class Built:
    """A filter in a form, with what it does and what its parts are.

    Attributes
    ----------
    bandwidth : float
        Fraction of the centre.
    ideal : Circuit
        Values by design, no strays.
    nominal : Circuit
        The same elements with the values that are bought; the same as `ideal` in a sketch.
    circuit : Circuit
        As soldered: one element a part, two (C2a, C2b) where parts stand in parallel.
    parts : tuple of tuple of float
        What is bought for each element of `nominal`, two where parts stand in parallel; empty in a sketch.
    midband_db : float
        Least loss around the centre.
    short_db : float
        Least of rejection less requirement over the lines that need any.
    problem : str
        What strays make impossible, in words.
    """

    prototype: Prototype
    form: Form
    centre_hz: float
    bandwidth: float
    ideal: Circuit
    nominal: Circuit
    circuit: Circuit
    parts: tuple[tuple[float, ...], ...]
    action: Action
    midband_db: float
    elements: tuple[ElementReport, ...]
    short_db: float
    problem: str = ""

    @property
    def one_sided(self) -> bool:
        """Whether it is a low-pass or a high-pass; its centre is then the cut-off."""
        return REGISTRY[self.form.topology].passes != "band"

    @property
    def resonators(self) -> int:
        """Order of a bandpass; a low-pass or high-pass counts one for every pair of its parts."""
        return max(self.prototype.order // 2, 1) if self.one_sided else self.prototype.order

    @property
    def topology(self) -> str:
        """Name of the topology."""
        return self.form.topology

    @property
    def verdict(self) -> ElementVerdict:
        """The worst verdict among the parts."""
        return max((e.verdict for e in self.elements), key=VERDICT_RANK.__getitem__, default="ok")

    @property
    def strain(self) -> tuple[int, int]:
        """How many parts are swamped, and how many marginal: less is better."""
        verdicts = [e.verdict for e in self.elements]
        return verdicts.count("swamped"), verdicts.count("marginal")

    @property
    def part_count(self) -> int:
        """How many parts are soldered."""
        return sum(len(p) for p in self.parts) or len(self.circuit.elements)


def sketch(
    job: Job, prototype: Prototype, form: Form, *, centre_hz: float, bandwidth: float, required_db: Array
) -> Built | None:
    """Design ideal values and see what they would do with the kit's losses; None where it cannot be designed so.

    Strays are taken as absorbed: each element is judged by what its strays' own tolerance leaves.
    """
    ideal = design_ideal(prototype, form, centre_hz=centre_hz, bandwidth=bandwidth)
    if ideal is None:
        return None
    return _measured(
        job, prototype, form, centre_hz, bandwidth, ideal, ideal, ideal, (), required_db, _lossy(job, ideal, form)
    )


def design_ideal(prototype: Prototype, form: Form, *, centre_hz: float, bandwidth: float) -> Circuit | None:
    """Return the ideal circuit of a form, None where it cannot be designed so."""
    try:
        return REGISTRY[form.topology].design(
            prototype,
            centre_hz=centre_hz,
            bandwidth=bandwidth,
            impedance_ohm=form.impedance_ohm,
            resonator=form.resonator,
        )
    except TopologyError:
        return None


def realise(job: Job, drawn: Built, required_db: Array) -> Built:
    """Absorb the strays, put the values on the kit's grid, re-trim, and see what exactly those parts do."""
    passband = passband_hz(drawn)
    absorbed = absorb(drawn.ideal, drawn.form.kit, passband_hz=passband)
    snapped = snap(absorbed.circuit, drawn.form.kit, ideal=drawn.ideal, passband_hz=passband)
    built = _measured(
        job,
        drawn.prototype,
        drawn.form,
        drawn.centre_hz,
        drawn.bandwidth,
        drawn.ideal,
        snapped.circuit,
        snapped.soldered,
        snapped.parts,
        required_db,
        as_built(job, snapped.soldered, drawn.form),
    )
    wanted = {e.ref: e.value for e in absorbed.circuit.elements}
    elements = tuple(_available(e, wanted[e.ref], drawn.form.kit) for e in built.elements)
    return replace(built, elements=elements, problem=absorbed.problem or snapped.problem)


def _available(report: ElementReport, wanted: float, kit: Kit) -> ElementReport:
    """Return the report, swamped where the value wanted lies beyond what the kit has and another stands for it."""
    shelf = kit.inductor if report.kind == "L" else kit.capacitor
    least, most = (
        (shelf.smallest_h, shelf.largest_h) if isinstance(shelf, InductorKit) else (shelf.smallest_f, shelf.largest_f)
    )
    if least / _OFF_SHELF <= wanted <= most * _OFF_SHELF:
        return report
    bound = (
        f"below the kit's {readable(least, report.unit)}"
        if wanted < least
        else (f"above the kit's {readable(most, report.unit)}")
    )
    words = f"not available: {readable(wanted, report.unit)} is {bound}"
    return replace(report, verdict="swamped", reason=f"{words}; {report.reason}")


def passband_hz(built: Built) -> tuple[float, float]:
    """Return the band edges [Hz], geometrically about the centre; of a one-sided filter its cut-off and beyond."""
    passes = REGISTRY[built.form.topology].passes
    if passes == "low":
        return built.centre_hz / 3, built.centre_hz
    if passes == "high":
        return built.centre_hz, 3 * built.centre_hz
    half = built.bandwidth / 2
    ratio = half + np.sqrt(1 + half**2)
    return built.centre_hz / ratio, built.centre_hz * ratio


def response(job: Job, circuit: Circuit, form: Form, frequency_hz: Array) -> Response:
    """Return the response of a circuit as bought, strays and losses included."""
    if job.design.unloaded_q is not None:
        return sweep(circuit, frequency_hz, unloaded_q=job.design.unloaded_q)
    return sweep_built(circuit, frequency_hz, kit=form.kit)


def as_built(job: Job, circuit: Circuit, form: Form) -> Attenuation:
    """Return the attenuation of a circuit as bought."""

    def attenuation(frequency_hz: Array) -> Array:
        return response(job, circuit, form, frequency_hz).attenuation_db

    return attenuation


def lossless(circuit: Circuit) -> Attenuation:
    """Return the attenuation of a circuit's elements without loss or stray."""

    def attenuation(frequency_hz: Array) -> Array:
        return sweep(circuit, frequency_hz).attenuation_db

    return attenuation


def _lossy(job: Job, circuit: Circuit, form: Form) -> Attenuation:
    """Return the attenuation of ideal values with losses only."""

    def attenuation(frequency_hz: Array) -> Array:
        q = job.design.unloaded_q
        return sweep(circuit, frequency_hz, kit=form.kit if q is None else None, unloaded_q=q).attenuation_db

    return attenuation


def _measured(
    job: Job,
    prototype: Prototype,
    form: Form,
    centre_hz: float,
    bandwidth: float,
    ideal: Circuit,
    nominal: Circuit,
    circuit: Circuit,
    parts: Sequence[tuple[float, ...]],
    required_db: Array,
    attenuation: Attenuation,
) -> Built:
    """Measure a circuit: every line, the midband loss, every part."""
    action = act(job, attenuation)
    needing = required_db > 0
    middle_hz = centre_hz if REGISTRY[form.topology].passes == "band" else job.centre_hz
    around = np.linspace(-_MIDBAND_SHARE / 2, _MIDBAND_SHARE / 2, _MIDBAND_POINTS) * min(bandwidth, _WIDEST_MIDBAND)
    midband_db = float(attenuation(middle_hz * (1 + around)).min())
    return Built(
        prototype=prototype,
        form=form,
        centre_hz=centre_hz,
        bandwidth=bandwidth,
        ideal=ideal,
        nominal=nominal,
        circuit=circuit,
        parts=tuple(parts),
        action=action,
        midband_db=midband_db,
        elements=flags.judge(
            ideal,
            form.kit,
            centre_hz=middle_hz,
            highest_line_hz=float(np.max(job.low_hz[needing], initial=centre_hz)),
            nominal=nominal,
        ),
        short_db=_least_spare_db(action, required_db),
    )


def spare_db(built: Built, required_db: Array) -> float:
    """Return the least of rejection less requirement over the lines that need any [dB]; infinite where none does."""
    return _least_spare_db(built.action, required_db)


def _least_spare_db(action: Action, required_db: Array) -> float:
    return float(np.min((action.rejection_db - required_db)[required_db > 0], initial=np.inf))


def meets(job: Job, built: Built) -> bool:
    """Tell whether the circuit gives every rejection within the loss and flatness limits."""
    return built.short_db >= 0 and passes_carrier(job, built)


def passes_carrier(job: Job, built: Built) -> bool:
    """Tell whether the carrier passes within the loss and flatness limits."""
    flat = built.action.carrier_most_db - built.midband_db <= job.design.flatness_db + 1e-9
    return built.midband_db <= job.design.loss_db and flat
