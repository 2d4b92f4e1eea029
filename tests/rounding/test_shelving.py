"""Shelving stages on the stocked grid: sensor and stage together are flat."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.errors import InfeasibleError
from synth.model.chain import StageTarget
from synth.model.part import OpAmp
from synth.rounding import chain_gain, gain_draft, round_section, trim_chain
from synth.rounding.shelving import Left, Shelf, ShelfAim, Window, round_shelf
from synth.spec import Rolloff, Sensor
from synth.topology import shelving
from synth.topology.place import Stocks, place
from tests.support.networks import around, op_amp, stocks, stray_op_amp

STOCKS = stocks("E96", "E12")
FAST = stray_op_amp(gain_bandwidth=150e6, second_pole=500e6, dc_gain=3e5)
CENTER = 100e3
SENSORS = {
    "high-pass": (Rolloff("high-pass", corner=2 * CENTER), 0.30, 0.25),
    "low-pass": (Rolloff("low-pass", corner=0.3 * CENTER), 0.25, 0.15),
}
SHAPES = pytest.mark.parametrize("shape", list(SENSORS))


def magnitude(rolloff: Rolloff, f: np.ndarray) -> np.ndarray:
    """First order, from its definition."""
    assert rolloff.corner is not None
    x = f / rolloff.corner
    return 1 / np.hypot(1, x) if rolloff.kind == "low-pass" else x / np.hypot(1, x)


def aim(shape: str, gain: float = 10.0, signal: float = 1e-3) -> ShelfAim:
    rolloff, band, tilt = SENSORS[shape]
    window = Window(CENTER, band * CENTER, signal)
    sensor = magnitude(rolloff, window.frequencies)
    kind: shelving.ShelfKind = "rising" if shape == "low-pass" else "falling"
    return ShelfAim(kind, StageTarget(gain, float(1 / sensor[0])), window, sensor / sensor[0], tilt, 3e-3, 27.0)


def shelf_of(shape: str, gain: float = 10.0, op_amp: OpAmp = FAST, stock: Stocks = STOCKS) -> Shelf:
    return round_shelf(aim(shape, gain), op_amp, stock)


@SHAPES
@pytest.mark.parametrize("gain", [4.0, 10.0, 30.0])
def test_sensor_and_stage_together_are_flat(shape: str, gain: float) -> None:
    """On a grid of its own, with the real amplifier and the sensor in the circuit: as flat as the shelf says."""
    shelf = shelf_of(shape, gain)
    rolloff, band, tilt = SENSORS[shape]
    sensor = Sensor(scale=1.0, input_unit="V", rolloff=(rolloff,))
    network = circuit.build_network(place([shelf.draft], STOCKS, around(CENTER, sensor)))
    u = np.linspace(-band, band, 101)
    f = CENTER * (u / 2 + np.hypot(1, u / 2))
    decibels = 20 * np.log10(np.abs(circuit.response(network, f)))
    swing = decibels.max() - decibels.min()
    assert swing == pytest.approx(float(shelf.left.swing), rel=0.02, abs=2e-4)
    assert swing < 0.3 * tilt  # a quarter costs nothing; the choice is made on 13 points
    assert shelf.measure <= 0.3
    flat = 20 * np.log10(magnitude(rolloff, f))
    assert swing < 0.03 * (flat.max() - flat.min())
    assert decibels[50] == pytest.approx(20 * np.log10(gain / aim(shape).target.pre_emphasis), abs=0.09)  # 1 %


@SHAPES
def test_values_are_stocked_and_the_loop_is_stable(shape: str) -> None:
    shelf = shelf_of(shape)
    v = shelf.draft.values
    kind = shelf.kind
    assert all(v[key] in STOCKS.resistors.values for key in ("RB", *shelving.RESISTORS[kind]))
    assert v[shelving.CAPACITOR[kind]] in STOCKS.capacitors.values
    assert v["CC"] in STOCKS.coupling.values
    assert shelf.phase_margin >= 55
    assert (shelf.zero < shelf.pole) == (kind == "rising")
    arrays = {key: np.array(x) for key, x in v.items()}
    np.testing.assert_allclose(shelving.corners(kind, arrays), (shelf.zero, shelf.pole))


@SHAPES
def test_with_a_nearly_ideal_amplifier_the_zero_is_the_sensor_s_corner(shape: str) -> None:
    """The pole takes a share of the slope, so the zero lies within a fifth of the corner."""
    rolloff = SENSORS[shape][0]
    fast = op_amp(gain_bandwidth=1e12, dc_gain=1e9, output_resistance=1e-2)
    shelf = shelf_of(shape, op_amp=fast)
    assert rolloff.corner is not None
    if shape == "high-pass":
        assert shelf.zero == pytest.approx(rolloff.corner, rel=0.2)
    want = float(shelving.slope(shelf.zero / CENTER, shelf.pole / CENTER))
    sensor = aim(shape).sensor
    assert want == pytest.approx(-np.log(sensor[-1] / sensor[3]) / aim(shape).window.log_span, abs=0.02)


@SHAPES
def test_capacitors_lose(shape: str) -> None:
    """The shelf's capacitor comes from the stock that sets frequencies, with its loss in the circuit."""
    chain = place([shelf_of(shape).draft], STOCKS, around(CENTER))
    part = next(p for p in chain.parts if p.role == "zero and pole of the shelf" and p.kind == "capacitor")
    assert part.tolerance == STOCKS.capacitors.tolerance
    assert part.loss_tangent == STOCKS.capacitors.loss_tangent_at(CENTER)
    assert f"R_{part.ref}_loss" in [e.name for e in circuit.build_network(chain).elements]


@SHAPES
def test_same_request_same_values(shape: str) -> None:
    assert shelf_of(shape).draft == shelf_of(shape).draft


def test_a_gain_below_one_at_the_small_end_is_held_there() -> None:
    """A low-pass at 0.3 f0 wants 3.5 at the centre: at 2.5 the zero is held, and the unevenness is told."""
    shelf = shelf_of("low-pass", 2.5)
    assert shelf.measure > 1
    assert float(shelving.low_gain("rising", {k: np.array(v) for k, v in shelf.draft.values.items()})) > 1


def test_no_shelf_of_a_gain_below_one() -> None:
    with pytest.raises(InfeasibleError, match=r"no falling shelf of slope -0\.79\d has a gain of 0\.5 .* give it more"):
        shelf_of("high-pass", 0.5)


def test_no_capacitor_of_the_right_size() -> None:
    tiny = STOCKS.capacitors.values[:1].copy()
    tiny.flags.writeable = False
    with pytest.raises(InfeasibleError, match=r"no stocked capacitor makes a rising shelf at 100 Hz .* stock other"):
        round_shelf(
            replace(aim("low-pass"), window=Window(100.0, 25.0, 0.0)),
            FAST,
            replace(STOCKS, capacitors=replace(STOCKS.capacitors, values=tiny)),
        )


def test_the_window_s_figures() -> None:
    """A straight line of 1 dB a decade in log f: tilt, swing and signal by hand."""
    window = Window(1e3, 400.0, 0.01)
    f = window.frequencies
    assert f[3] * f[-1] == pytest.approx(1e6)
    assert f[-1] - f[3] == pytest.approx(400.0)
    left = window.left(10 ** (np.log10(f / 1e3) / 20))
    assert float(left.tilt) == pytest.approx(np.log10(f[-1] / f[3]))
    assert float(left.swing) == pytest.approx(float(left.tilt))
    assert float(left.signal) == pytest.approx(10 ** (np.log10(1.01 / 0.99) / 20) - 1)
    even = window.left(1 + ((f / 1e3 - 1e3 / f) ** 2))
    assert abs(float(even.tilt)) < 1e-12
    assert float(even.swing) == pytest.approx(20 * np.log10(1.16))
    assert aim("low-pass").measure(Left(np.array(0.0), np.array(0.3), np.array(0.0))) == pytest.approx(2.0)


@SHAPES
def test_variants_are_as_flat_as_the_chosen_values(shape: str) -> None:
    shelf, wish = shelf_of(shape), aim(shape)
    assert len(shelf.variants) > 3
    assert shelf.variants[0].values == shelf.draft.values
    assert shelf.variants[0].gain == shelf.gain
    for variant in shelf.variants:
        chain = place([replace(shelf.draft, values=variant.values)], STOCKS, around(CENTER))
        h = np.abs(circuit.response(circuit.build_network(chain), wish.window.frequencies))
        assert h[0] == pytest.approx(variant.gain, rel=1e-9)
        assert float(wish.measure(wish.window.left(h * wish.sensor))) <= 0.25


def test_a_chain_with_nothing_but_a_shelf_is_trimmed_in_its_sections() -> None:
    shelf = shelf_of("low-pass")
    section = round_section(StageTarget(1.0, 1.0, CENTER, 5.0), FAST, STOCKS, CENTER, 27.0)
    drafts = [shelf.draft, section.draft, section.draft]
    for factor in (0.98, 1.0, 1.02):
        trimmed = trim_chain(drafts, {1: section.variants, 2: section.variants}, STOCKS, around(CENTER), 10.0 * factor)
        assert trimmed[0] is shelf.draft
        assert chain_gain(place(trimmed, STOCKS, around(CENTER))) == pytest.approx(10.0 * factor, rel=3e-4)


def test_with_one_section_the_shelf_moves_among_its_variants() -> None:
    shelf = shelf_of("low-pass")
    section = round_section(StageTarget(1.0, 1.0, CENTER, 5.0), FAST, STOCKS, CENTER, 27.0)
    variants = {0: shelf.variants, 1: section.variants}
    trimmed = trim_chain([shelf.draft, section.draft], variants, STOCKS, around(CENTER), 10.0)
    assert trimmed[0].values in [v.values for v in shelf.variants]
    assert chain_gain(place(trimmed, STOCKS, around(CENTER))) == pytest.approx(10.0, rel=2e-3)


def test_a_gain_stage_before_the_shelf_is_trimmed_and_the_shelf_is_not() -> None:
    shelf = shelf_of("high-pass")
    section = round_section(StageTarget(1.0, 1.0, CENTER, 5.0), FAST, STOCKS, CENTER, 27.0)
    plain = gain_draft(StageTarget(20.0), FAST, STOCKS, CENTER, 27.0, 25.0)
    trimmed = trim_chain([plain, shelf.draft, section.draft], {2: section.variants}, STOCKS, around(CENTER), 210.0)
    assert trimmed[1] is shelf.draft
    assert trimmed[0].values != plain.values
    assert chain_gain(place(trimmed, STOCKS, around(CENTER))) == pytest.approx(210.0, rel=3e-4)


def test_a_chain_of_a_lone_shelf_cannot_be_trimmed() -> None:
    with pytest.raises(InfeasibleError, match="the chain has no gain stage to trim"):
        trim_chain([shelf_of("low-pass").draft], {}, STOCKS, around(CENTER), 11.0)
