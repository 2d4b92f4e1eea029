"""Limits, margins and verdicts, and what is never called met."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from synth import circuit
from synth.model.judgement import Realized, Requirement
from synth.spec import Spec, load_spec
from synth.verification import relative_margin, verify
from synth.verification.headroom import Excursion
from synth.verification.requirements import LEVEL_TOLERANCE, PHASE_MARGIN, derived, limited, not_judged
from tests.api.made import ROOT, changed, design_of, pickup, spec_of

UNTREATED = {
    "accuracy",
    "accuracy at smallest",
    "yield",
    "signal tolerance",
    "settling",
    "interference",
    "temperature",
    "detector",
    "calibration",
    "resonator",
    "sensor scale",
    "preference",
}


# ------------------------------------------------------------------------------------------------ one requirement


@pytest.mark.parametrize(
    ("nominal", "least", "most", "margin", "met"),
    [
        (5.0, 4.0, None, 1.0, True),
        (3.0, 4.0, None, -1.0, False),
        (5.0, None, 8.0, 3.0, True),
        (9.0, None, 8.0, -1.0, False),
        (5.0, 4.0, 8.0, 1.0, True),
        (7.5, 4.0, 8.0, 0.5, True),
        (9.0, 4.0, 8.0, -1.0, False),
        (1.0, 4.0, 8.0, -3.0, False),
        (4.0, 4.0, 4.0, 0.0, True),
    ],
)
def test_a_margin_is_the_distance_to_the_nearest_limit(
    nominal: float, least: float | None, most: float | None, margin: float, met: bool
) -> None:
    found = limited("x", "V", nominal, least, most, note="here")
    assert (found.margin, found.met) == (margin, met)
    assert (found.name, found.unit, found.at_least, found.at_most, found.note) == ("x", "V", least, most, "here")
    assert found.nominal == nominal


def test_what_is_no_number_is_not_met() -> None:
    assert limited("x", "V", math.nan, at_most=1.0).met is False
    assert limited("x", "V", math.inf, at_most=1.0).met is False
    assert limited("x", "V", math.inf, at_least=1.0).met is True


def test_relative_margins_compare_unlike_requirements() -> None:
    assert relative_margin(limited("x", "Hz", 90.0, at_least=100.0)) == pytest.approx(-0.1)
    assert relative_margin(limited("x", "Hz", 110.0, at_most=100.0)) == pytest.approx(-0.1)
    assert relative_margin(limited("x", "Hz", 95.0, 90.0, 110.0)) == pytest.approx(0.5)  # of the half width
    assert relative_margin(limited("x", "Hz", 120.0, 90.0, 110.0)) == pytest.approx(-1.0)
    assert relative_margin(Requirement("x", "Hz")) == math.inf


def test_relative_margin_at_a_limit_of_nothing() -> None:
    assert relative_margin(limited("x", "1/s", -5.0, at_least=0.0)) == pytest.approx(-1.0)
    assert relative_margin(limited("x", "1/s", 0.0, at_least=0.0)) == 0.0


def test_a_relative_margin_has_the_sign_of_the_verdict() -> None:
    for requirement in pickup().requirements:
        if requirement.met is not None:
            assert (relative_margin(requirement) >= 0) == requirement.met


# ------------------------------------------------------------------------------------------------ every chain


def excursion(ref: str, **figures: float) -> Excursion:
    plain = Excursion(ref, 0.7, 0.0, 1.0, 3.0, 1e5, 1e6, 0.1, 2.0, 1e-3, 40e-3)
    return replace(plain, **figures)


BAND = Realized(60e3, 3e3, 58.5e3, 61.5e3, 60.0, 40.0, (complex(-100.0, 1e5), complex(-900.0, 0.0)))


def found(
    *excursions: Excursion, margins: tuple[float, ...] = (60.0,), band: Realized = BAND
) -> dict[str, Requirement]:
    loops = tuple(circuit.Margin(f"U{k}", margin, 1e6) for k, margin in enumerate(margins, 1))
    return {r.name: r for r in derived(excursions, loops, band)}


def test_the_worst_amplifier_is_named() -> None:
    judged = found(
        excursion("U1", peak=2.0),
        excursion("U2", slew=5e5, slew_allowed=6e5),
        excursion("U3", input_peak=1.9),
        margins=(70.0, 50.0, 60.0),
    )
    assert judged["output swing"].note == "peak at U1"
    assert judged["slew rate"].note == "at U2"
    assert judged["input range"].note == "peak at U3"
    assert judged["phase margin"].note == "of U2"
    assert all(r.met for r in judged.values())


def test_the_worst_swing_is_the_fullest_not_the_largest() -> None:
    judged = found(excursion("U1", peak=4.0, allowed=10.0), excursion("U2", peak=1.9, allowed=2.0))
    assert (judged["output swing"].note, judged["output swing"].at_most) == ("peak at U2", 2.0)


@pytest.mark.parametrize(
    ("name", "over"),
    [
        ("output swing", {"peak": 3.1}),
        ("slew rate", {"slew": 1.1e6}),
        ("input range", {"input_peak": 2.1}),
        ("output swing", {"allowed": -0.5}),
    ],
)
def test_what_an_amplifier_cannot_carry_is_missed(name: str, over: dict[str, float]) -> None:
    judged = found(excursion("U1", **over), excursion("U2"))
    assert [r.name for r in judged.values() if not r.met] == [name]
    assert judged[name].note.endswith("U1")


def test_a_loop_near_oscillation_is_missed() -> None:
    judged = found(excursion("U1"), margins=(60.0, PHASE_MARGIN - 1))
    assert judged["phase margin"].met is False
    assert judged["phase margin"].margin == pytest.approx(-1.0)


def test_a_pole_to_the_right_is_missed() -> None:
    unstable = replace(BAND, poles=(*BAND.poles, complex(3.0, 2e5)))
    judged = found(excursion("U1"), band=unstable)["slowest decay"]
    assert (judged.met, judged.nominal) == (False, -3.0)
    assert found(excursion("U1"))["slowest decay"].nominal == 100.0


# ------------------------------------------------------------------------------------------------ a spec's lines


def requirement(text: str, name: str) -> Requirement:
    return next(r for r in design_of(text).requirements if r.name == name)


def test_the_limits_are_those_of_the_spec() -> None:
    judged = {r.name: r for r in pickup().requirements}
    target = pickup().spec.target
    assert (judged["bandwidth"].at_least, judged["bandwidth"].at_most) == pytest.approx((4500.0, 5500.0))
    assert (judged["center frequency"].at_least, judged["center frequency"].at_most) == (98750.0, 101250.0)
    assert judged["output at full scale"].at_least == pytest.approx(1 - (target.accuracy or 0))
    assert judged["reject 300 kHz"].at_least == 60.0
    assert judged["ripple"].at_most == 0.5
    assert judged["group delay variation"].at_most == pytest.approx(20e-6)
    assert judged["signal to noise"].at_least == 20.0
    for r in judged.values():
        assert (r.met is None) == (r.nominal is None)


def test_the_output_without_an_accuracy_has_the_usual_tolerance() -> None:
    found = requirement(changed(), "output at full scale")
    assert (found.at_least, found.at_most) == pytest.approx((1 - LEVEL_TOLERANCE, 1 + LEVEL_TOLERANCE))


def test_the_output_of_a_gain_is_that_of_full_scale() -> None:
    found = requirement(changed(('output = "1 V"', 'gain = "80 dB"')), "output at full scale")
    assert found.nominal == pytest.approx(1e4 * 20 * 2e-6, rel=0.01)


def test_only_what_is_asked_is_judged() -> None:
    names = {r.name for r in design_of(changed()).requirements}
    assert not names & {"ripple", "group delay variation", "signal to noise", "settling", "accuracy"}
    assert not any(name.startswith("reject") for name in names)


def test_every_reject_is_judged() -> None:
    lines = 'reject = [{ frequency = "200 kHz", by = "20 dB" }, { frequency = "10 kHz", by = "20 dB" }]'
    names = {r.name for r in design_of(changed(target=lines)).requirements}
    assert {"reject 200 kHz", "reject 10 kHz"} <= names


def test_the_same_chain_is_judged_by_another_spec() -> None:
    made = design_of(changed())
    stricter = spec_of(changed(target='group_delay_variation = "1 ns"\nsignal_to_noise = "38 dB"'))
    verdict = verify(made.chain, stricter)
    assert {r.name for r in verdict.requirements if r.met is False} == {"group delay variation", "signal to noise"}
    assert not verdict.all_met


# ------------------------------------------------------------------------------------------------ not judged


@pytest.fixture(scope="module")
def everything(tmp_path_factory: pytest.TempPathFactory) -> Spec:
    """The contract's example, with all that may stand in a spec."""
    folder = tmp_path_factory.mktemp("contract")
    text = (ROOT / "tests" / "spec" / "contract.toml").read_text(encoding="utf-8")
    text = text.replace('op_amps    = ["..."]', "op_amps = []")
    resonator = 'series_resistance = "30 kohm"\nmotional_capacitance = "3 fF"\nfrequency = "100 kHz"\n'
    parts = text.partition("[resonator]")
    line, _, rest = parts[2].partition("\n")
    text = f"{parts[0]}[resonator]{line}\n{resonator}{rest}"
    text = text.partition("[choose]")[0] + '[choose]\nprefer = "noise"\neffort = "full"\n'
    (folder / "spec.toml").write_text(text, encoding="utf-8")
    (folder / "mine.toml").write_text("# no parts\n")
    (folder / "drawer.csv").write_text("kind,value,quantity\n")
    return load_spec(folder / "spec.toml")


def test_a_spec_with_everything_names_all_that_is_not_judged(everything: Spec) -> None:
    names = [r.name for r in not_judged(everything)]
    assert len(names) == len(set(names))
    assert set(names) <= UNTREATED
    assert set(names) | judged_names(everything) >= UNTREATED


def judged_names(spec: Spec) -> set[str]:
    """What is judged of a spec after all."""
    verdict = verify(pickup().chain, spec)
    return {r.name for r in verdict.requirements if r.met is not None}


def test_what_is_not_judged_is_never_met(everything: Spec) -> None:
    for r in not_judged(everything):
        assert (r.met, r.nominal, r.margin) == (None, None, None)
        assert r.note


def test_a_plain_spec_leaves_nothing_but_the_yield() -> None:
    assert [r.name for r in not_judged(spec_of(changed()))] == ["yield"]


@pytest.mark.parametrize(
    ("text", "name"),
    [
        (changed(target='accuracy = "3 %"'), "accuracy"),
        (changed(target='accuracy_smallest = "9 %"'), "accuracy at smallest"),
        (changed(target='signal_tolerance = "50 ppm"'), "signal tolerance"),
        (changed(target='settling = { within = "2 ms", to = "1 %" }'), "settling"),
        (changed(sensor='scale_tolerance = "5 %"'), "sensor scale"),
        (changed(sensor='scale_temperature_coefficient = "100 ppm"'), "sensor scale"),
        (changed(sensor='rolloff = [{ kind = "low-pass", corner = "1 MHz", tolerance = "9 %" }]'), "sensor scale"),
        (changed(end='[[interference]]\nkind = "tone"\nfrequency = "5 kHz"\nlevel = "1 uA"\n'), "interference"),
        (changed(end='[environment]\ntemperature = ["0 degC", "50 degC"]\n'), "temperature"),
        (changed(end='[detector]\nkind = "rms"\n'), "detector"),
        (changed(end='[calibration]\ntrim = "none"\n'), "calibration"),
        (changed(end='[resonator]\nseries_resistance = "30 kohm"\n'), "resonator"),
        (changed(end='[choose]\nprefer = "noise"\n'), "preference"),
        (changed(end='[choose]\neffort = "full"\n'), "preference"),
    ],
)
def test_a_key_without_a_judge_is_named_by_itself(text: str, name: str) -> None:
    """Either it is said to be not judged, or it is judged by now; it is never passed over."""
    spec = spec_of(text)
    plain = {r.name for r in not_judged(spec_of(changed()))}
    named = {r.name for r in not_judged(spec)} - plain
    if not named:
        named = judged_names(spec) - judged_names(spec_of(changed()))
    assert named == {name}


@pytest.mark.parametrize(
    "text",
    [
        changed(end='[environment]\nambient = "40 degC"\n'),
        changed(sensor='rolloff = [{ kind = "low-pass", corner = "1 MHz" }]'),
        changed(end='[choose]\nprefer = "yield"\neffort = "quick"\n'),
        changed(end='[filter]\nfamily = "bessel"\n'),
        changed(end='[parts]\nresistors = { series = "E24" }\n'),
        changed(target='load = "10 kohm"\nload_capacitance = "20 pF"'),
    ],
)
def test_a_key_that_takes_effect_is_not_called_not_judged(text: str) -> None:
    assert {r.name for r in not_judged(spec_of(text))} == {"yield"}


def test_all_met_ignores_what_is_not_judged() -> None:
    verdict = pickup().verification
    assert any(r.met is None for r in verdict.requirements)
    assert verdict.all_met
    missed = replace(verdict, requirements=(*verdict.requirements, limited("x", "V", 2.0, at_most=1.0)))
    assert not missed.all_met
