"""The first spec for a person to edit."""

from __future__ import annotations

import re

import pytest

from synth.errors import SpecError
from synth.spec import known_keys, parse_spec, starter_spec
from synth.spec.starter import GIVEN


def test_it_is_valid_as_it_stands() -> None:
    spec = parse_spec(starter_spec())
    assert (spec.target.center_frequency, spec.target.bandwidth, spec.sensor.scale) == (60e3, 3e3, 20.0)
    assert (spec.supply.positive, spec.supply.negative) == (5.0, -5.0)
    assert len(spec.sensor.rolloff) == 1


def test_it_names_every_key_of_the_format() -> None:
    text = starter_spec()
    for section, keys in known_keys().items():
        for key in keys:
            assert re.search(rf"\b{key}\b", text), f"{section}.{key}"
    assert max(map(len, text.splitlines())) <= 120


def test_every_optional_line_is_valid_once_its_mark_is_removed() -> None:
    lines = starter_spec(resistance="25 ohm", gain="88 dB").splitlines()
    others = r"# (output =|burden|magnetizing|motional|catalogs|stock|voltage|through|resistor\b|resistor_|trim|phase)"
    lines = [line for line in lines if not re.match(others, line)]
    text = "\n".join(re.sub(r"^# (?=\[|[a-z_]+ = )", "", line) for line in lines)
    text = text.replace('kind = "tone"', 'kind = "square"').replace('kind = "rms"', 'kind = "adc"')
    spec = parse_spec(text)
    assert spec.detector is not None
    assert spec.resonator is not None
    assert (spec.filter.sections, spec.target.accuracy, spec.interference[0].rise_time) == (2, 0.03, 2e-8)


def test_what_is_given_is_used() -> None:
    spec = parse_spec(
        starter_spec(
            title='The "new" channel \\ 2',
            center_frequency="40 kHz",
            full_scale="3 Pa",
            scale="5 mV/Pa",
            gain="60 dB",
            resistance="1k",
            capacitance="1 nF",
            inductance="1 mH",
            accuracy="2 %",
            signal_to_noise="30 dB",
            corner="10 Hz",
            positive="3.3 V",
            smallest=None,
        )
    )
    assert spec.title == 'The "new" channel \\ 2'
    assert (spec.target.bandwidth, spec.target.smallest, spec.target.gain) == (2000.0, 0.15, pytest.approx(1000.0))
    assert (spec.target.accuracy, spec.target.signal_to_noise) == (0.02, 30.0)
    assert (spec.sensor.resistance, spec.sensor.capacitance, spec.sensor.inductance) == (1e3, 1e-9, 1e-3)
    assert spec.sensor.rolloff[0].corner == 10.0
    assert (spec.supply.positive, spec.supply.negative) == (3.3, None)


@pytest.mark.parametrize(
    ("scale", "output", "unit"),
    [("0.6 A/W", "current", "W"), ("350 pC/N", "charge", "N"), ("2 V/furlong", "voltage", "furlong")],
)
def test_the_scale_decides_kind_and_unit(scale: str, output: str, unit: str) -> None:
    spec = parse_spec(starter_spec(scale=scale))
    assert (spec.sensor.output, spec.sensor.input_unit) == (output, unit)
    assert (spec.target.full_scale, spec.target.smallest) == (1.0, 0.05)
    assert spec.sensor.rolloff == ()


def test_the_smallest_reading_gives_the_full_scale() -> None:
    assert parse_spec(starter_spec(smallest="5 nA")).target.full_scale == pytest.approx(1e-7)


@pytest.mark.parametrize(
    ("given", "match"),
    [
        ({"center_frequency": "sixty"}, 'center_frequency = "sixty": does not start with a number'),
        ({"center_frequency": "0 Hz"}, 'center_frequency = "0 Hz": must be above zero'),
        ({"center_frequency": "60 kV"}, 'wrong unit "kV"; expected Hz'),
        ({"bandwidth": "200 kHz"}, "^the values given: target.bandwidth .*twice the center frequency"),
        ({"scale": "20 X/A"}, 'scale = "20 X/A": the unit before the slash'),
        ({"full_scale": "3 Pa"}, 'full_scale = "3 Pa": wrong unit "Pa"; expected A'),
        ({"output": "1 V", "gain": "60 dB"}, r"target\.gain .*cannot stand beside target\.output"),
        ({"negative": "5 V"}, r"supply\.negative .*must be below zero"),
        ({"title": "a\n.control"}, r"title = .*remove the character U\+000A"),
        ({"title": "a\x7f"}, r"remove the character U\+007F"),
        ({"resistance": ""}, "resistance = \"\": must not be empty"),
        ({"positve": "5 V"}, r"\"positve\" cannot be given for a new spec; did you mean positive\?"),
        ({"positive": 5}, "positive = 5: must be a text"),
    ],
)
def test_what_cannot_be_used_is_refused(given: dict[str, str], match: str) -> None:
    with pytest.raises(SpecError, match=match):
        starter_spec(**given)


def test_every_key_that_can_be_given_is_known() -> None:
    known = set().union(*known_keys().values())
    assert set(GIVEN) <= known
