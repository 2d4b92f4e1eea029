"""Pre-emphasis: what makes good the sensor's rolloff at the centre, a flat factor or a shelving stage.

The loss at the centre needs its reciprocal, 1.25 for 20 % down.  A flat factor leaves the sensor's slope: over the
band it tilts the response, over the signal's tolerance it changes the reading.  Where either is too much the last
gain stage becomes a shelf, the sensor's inverse within bounds; that costs noise, which is told.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from synth import circuit
from synth.circuit.network import FloatArray
from synth.circuit.sensor import sensor_network
from synth.errors import CircuitError, InfeasibleError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.planning.amplifiers import DEFAULT_ACCURACY, SMALLEST_STAGE_GAIN, Fit, gain_candidates
from synth.planning.partition import Partition
from synth.planning.source import stage_source
from synth.quantity import format_percent, format_si
from synth.rounding.gain import gain_draft
from synth.rounding.shelving import PHASE_MARGIN, Left, Shelf, ShelfAim, Window, round_shelf
from synth.spec import Spec
from synth.topology import non_inverting, shelving
from synth.topology.place import Draft, Stocks, Surroundings, place
from synth.topology.shelving import ShelfKind

ACCURACY_SHARE = 0.1  # of the accuracy, that the change of gain over the signal tolerance may take
RIPPLE_SHARE = 0.5  # of the ripple, that the tilt over the band may take
CENTER_SHARE = 0.2  # of the centre's tolerance, that the tilt may shift it by
DEFAULT_RIPPLE = 0.5  # [dB] where the spec asks none
NOTHING = 1e-3  # a share of the response that is not worth a word
QUIET = 0.05  # [dB] of noise that are not worth a word
USUAL_POLE: dict[ShelfKind, float] = {"rising": 5.0, "falling": 1 / 8}  # of the centre
EXTREME_ZERO: dict[ShelfKind, float] = {"rising": 0.15, "falling": 6.7}  # of the centre, for a sensor too steep
GAIN_ROOM = 1.1  # over the least gain of a shelf
MOST_TRIED = 8  # amplifiers
USEFUL = 0.5  # of the tilt that a flat factor leaves: a shelf that leaves more is not worth its parts
NOISE_POINTS = 41


@dataclass(frozen=True, slots=True)
class SensorSlope:
    """What a flat factor would leave of the sensor's rolloff, and what it may leave.

    Attributes:
        window: band and signal tolerance; magnitude: of the sensor at the window's frequencies, re the centre.
        left: unevenness; tilt_limit: [dB]; signal_limit: share.
    """

    window: Window
    magnitude: FloatArray
    left: Left
    tilt_limit: float
    signal_limit: float

    @property
    def is_flat(self) -> bool:
        """True where a flat factor does."""
        return not self.missed

    @property
    def kind(self) -> ShelfKind:
        """The shelf that goes against it."""
        return "falling" if self.left.tilt > 0 else "rising"

    @property
    def missed(self) -> tuple[str, ...]:
        """What a flat factor misses, in words."""
        return _missed(self.left, self.tilt_limit, self.signal_limit)


@dataclass(frozen=True, slots=True)
class Emphasis:
    """How the loss is made good.

    Attributes:
        split: gain stages, their gains moved where a shelf needs more; the last one is the shelf where there is one.
        shelf: None for a flat factor; slope: what that leaves; factor: reciprocal of the loss.
        refusal: why there is no shelf where one is wanted.
    """

    split: Partition
    shelf: Shelf | None
    slope: SensorSlope
    factor: float
    refusal: str = ""


def sensor_slope(spec: Spec) -> SensorSlope:
    """The slope that the sensor leaves over the band and the signal tolerance, with its limits.

    A bandpass section falls by 1/2 neper per half bandwidth at its -3 dB points, more of them fall faster: an odd part
    of t neper at the edges shifts both, and the centre, by at most t of the bandwidth.
    """
    target = spec.target
    window = Window(target.center_frequency, target.bandwidth, target.signal_tolerance or 0.0)
    gain = np.abs(circuit.response(sensor_network(spec.sensor, spec.environment.ambient), window.frequencies))
    accuracy = target.accuracy if target.accuracy is not None else DEFAULT_ACCURACY
    ripple = target.ripple if target.ripple is not None else DEFAULT_RIPPLE
    shift = 2 * CENTER_SHARE * target.center_tolerance * 20 / math.log(10)
    magnitude: FloatArray = gain / gain[0]
    return SensorSlope(
        window, magnitude, window.left(magnitude), min(RIPPLE_SHARE * ripple, shift), ACCURACY_SHARE * accuracy
    )


def make_emphasis(
    spec: Spec, op_amps: tuple[OpAmp, ...], stocks: Stocks, split: Partition, attenuation: float
) -> Emphasis:
    """A flat factor where it does, else a shelf in place of the last gain stage; flat, too, where none can be built."""
    slope = sensor_slope(spec)
    flat = Emphasis(split, None, slope, 1 / attenuation)
    if slope.is_flat:
        return flat
    try:
        return _shelved(spec, op_amps, stocks, flat)
    except (InfeasibleError, CircuitError) as error:
        return replace(flat, refusal=str(error))


def _shelved(spec: Spec, op_amps: tuple[OpAmp, ...], stocks: Stocks, flat: Emphasis) -> Emphasis:
    slope, split = flat.slope, flat.split
    gain = max(split.gains[-1], GAIN_ROOM * _least_gain(slope))
    source = stage_source(spec) if len(split.gains) == 1 else 0.0
    aim = ShelfAim(
        slope.kind,
        StageTarget(gain, flat.factor),
        slope.window,
        slope.magnitude,
        slope.tilt_limit,
        slope.signal_limit,
        spec.environment.ambient,
        source,
    )
    fits = [fit for fit in gain_candidates(spec, op_amps, source) if fit.largest_gain >= gain]
    fits.sort(key=lambda fit: fit.op_amp != split.op_amps[-1])  # stable: the rest stay in order
    if not fits:
        raise InfeasibleError(
            f"no amplifier allowed has a gain of {gain:.3g} to spare at {format_si(slope.window.center, 'Hz')}; "
            "allow a faster type in parts.op_amps"
        )
    shelf = _best_shelf(aim, fits, stocks)
    assert shelf.draft.op_amp is not None
    if shelf.measure > 1 and abs(shelf.left.tilt) > USEFUL * abs(slope.left.tilt):
        raise InfeasibleError("a first-order shelf leaves most of it: the sensor resonates or falls too steeply")
    return replace(flat, split=_regained(split, gain, shelf.draft.op_amp), shelf=shelf)


def _least_gain(slope: SensorSlope) -> float:
    """Least gain at the centre of a shelf against the sensor's slope."""
    kind = slope.kind
    wanted = -math.log(slope.magnitude[-1] / slope.magnitude[3]) / slope.window.log_span
    zero = float(shelving.zero_for_slope(wanted, USUAL_POLE[kind]))
    zero = max(zero, EXTREME_ZERO[kind]) if kind == "rising" else min(zero, EXTREME_ZERO[kind])
    return shelving.least_gain(zero, USUAL_POLE[kind])


def _best_shelf(aim: ShelfAim, fits: Sequence[Fit], stocks: Stocks) -> Shelf:
    """The shelf of the first amplifier that does it with a good phase margin, else of the one that comes nearest."""
    best: tuple[tuple[bool, bool, float], Shelf] | None = None
    failure: InfeasibleError | None = None
    for fit in fits[:MOST_TRIED]:
        try:
            shelf = round_shelf(aim, fit.op_amp, stocks)
        except InfeasibleError as error:
            failure = failure or error
            continue
        if shelf.high_gain < fit.op_amp.minimum_noise_gain:
            failure = failure or InfeasibleError(
                f"{fit.op_amp.type} is not stable at the {shelf.high_gain:.3g} that the shelf leaves at high frequency"
            )
            continue
        key = (shelf.phase_margin < PHASE_MARGIN, shelf.measure > 1, round(max(shelf.measure, 1.0), 3))
        if best is None or key < best[0]:
            best = (key, shelf)
        if not any(key[:2]):
            break
    if best is None:
        raise failure or InfeasibleError("no amplifier allowed makes the shelf")
    return best[1]


def _regained(split: Partition, gain: float, op_amp: OpAmp) -> Partition:
    """The split with another gain in its last stage; the other stages take it back, or else the sections."""
    factor = split.gains[-1] / gain
    others, section = list(split.gains[:-1]), split.section_gain
    each = factor ** (1 / len(others)) if others else 0.0
    least = [max(SMALLEST_STAGE_GAIN, a.minimum_noise_gain) for a in split.op_amps[:-1]]
    if others and all(g * each >= bound for g, bound in zip(others, least, strict=True)):
        others = [g * each for g in others]
    else:
        section *= factor
    return Partition((*others, gain), (*split.op_amps[:-1], op_amp), section)


def emphasis_notes(
    emphasis: Emphasis, drafts: Sequence[Draft], stocks: Stocks, around: Surroundings
) -> Iterator[str]:
    """What the person should know of the pre-emphasis of a chain; nothing where the sensor has no rolloff.

    Args:
        drafts: the chain's stages; a shelf among them where the emphasis has one.
    """
    slope = emphasis.slope
    if emphasis.shelf is not None:
        yield emphasis_caution(emphasis, noise_cost(drafts, stocks, around, slope.window))
        return
    if abs(emphasis.factor - 1) < NOTHING and float(slope.left.swing) * math.log(10) / 20 < NOTHING:
        return
    tilt = _percent(10 ** (float(slope.left.tilt) / 20) - 1)
    text = f"flat pre-emphasis {emphasis.factor:.4g}: the sensor's slope leaves {tilt} over the band"
    if slope.window.signal > 0:
        text += f", {_percent(float(slope.left.signal))} over the signal tolerance"
    if emphasis.refusal:
        text += f"; that is {' and '.join(slope.missed)}, and no shelving stage can be built: {emphasis.refusal}"
    yield text


def emphasis_caution(emphasis: Emphasis, noise: float | None) -> str:
    """One line on a shelf: its corners, what it leaves, what it misses, and its cost in noise [dB].

    Args:
        noise: in-band output noise over that of a flat factor of the same gain [dB], None where it is not known.
    """
    shelf, slope = emphasis.shelf, emphasis.slope
    if shelf is None:
        raise ValueError("a flat pre-emphasis has no shelf to caution of")
    text = (
        f"shelving pre-emphasis {emphasis.factor:.4g}, zero {format_si(shelf.zero, 'Hz', 3)}, pole "
        f"{format_si(shelf.pole, 'Hz', 3)}: leaves {abs(float(shelf.left.swing)):.2g} dB over the band where a flat "
        f"factor leaves {abs(float(slope.left.swing)):.2g} dB"
    )
    if shelf.measure > 1:
        missed = _missed(shelf.left, slope.tilt_limit, slope.signal_limit)
        text += f"; still {' and '.join(missed)}" if missed else "; what is left is symmetric, of the bandwidth"
    if noise is not None:
        change = "as" if abs(noise) < QUIET else f"{abs(noise):.1f} dB {'above that' if noise > 0 else 'below that'}"
        text += f"; in-band noise {change} with a flat factor"
    return text


def _missed(left: Left, tilt_limit: float, signal_limit: float) -> tuple[str, ...]:
    found = []
    if abs(left.tilt) > tilt_limit:
        found.append(f"a tilt of {abs(float(left.tilt)):.2g} dB over the band, {tilt_limit:.2g} dB allowed")
    if abs(left.signal) > signal_limit:
        change, allowed = _percent(float(left.signal)), format_percent(signal_limit, 2)
        found.append(f"a change of {change} over the signal tolerance, {allowed} allowed")
    return tuple(found)


def _percent(share: float) -> str:
    """The size of a share in percent, one digit of it."""
    size = 100 * abs(share)
    return "below 0.001 %" if size < 0.001 else f"{float(f'{size:.1g}'):g} %"


def noise_cost(drafts: Sequence[Draft], stocks: Stocks, around: Surroundings, window: Window) -> float | None:
    """In-band output noise over gain of a chain with a shelf against its twin with a flat factor [dB].

    None where the twin cannot be built.
    """
    twin = list(drafts)
    for k, draft in enumerate(drafts):
        if draft.topology.kind == "pre-emphasis":
            try:
                twin[k] = _flat_twin(draft, stocks, around)
            except InfeasibleError:
                return None
    shelved, flat = (_noise_over_gain(place(each, stocks, around), window) for each in (drafts, twin))
    return 20 * math.log10(shelved / flat)


def _flat_twin(draft: Draft, stocks: Stocks, around: Surroundings) -> Draft:
    """A plain gain stage of the same gain and amplifier, damped where the shelf is."""
    assert draft.op_amp is not None
    twin = gain_draft(draft.target, draft.op_amp, stocks, around.center_frequency, around.ambient, 0.0)
    held = {key: value for key, value in draft.values.items() if key in ("RD", "CD")}
    topology = non_inverting.DAMPED if held else twin.topology
    return replace(twin, topology=topology, values={**twin.values, **held})


def _noise_over_gain(chain: Chain, window: Window) -> float:
    """Output noise in the band over the gain at the centre [input unit]."""
    edges = window.frequencies[[3, -1]]
    f = np.linspace(edges[0], edges[1], NOISE_POINTS)
    network = circuit.build_network(chain)
    rms = circuit.integrated(f, circuit.noise(network, f).density, float(f[0]), float(f[-1]))
    return rms / float(abs(circuit.response(network, [window.center])[0]))
