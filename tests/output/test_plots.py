"""Plots: well-formed, the same every time, harmless whatever the texts are."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from xml.etree import ElementTree

import matplotlib as mpl
import pytest

from synth.model.record import DesignRecord
from synth.output.figure import band_edges, scale_for, styled
from synth.output.group_delay_plot import group_delay_figure, group_delay_svg
from synth.output.noise_plot import noise_figure, noise_svg
from synth.output.response_plot import response_figure, response_svg
from synth.spec import Reject
from tests.support.records import long_record, record

PLOTS = (response_svg, group_delay_svg, noise_svg)
HOSTILE = r'$\frac{ <script>alert(1)</script> --> ]]> & "quoted" $x_$'
Plot = Callable[[DesignRecord], bytes]


def close_panel(made: DesignRecord):  # type: ignore[no-untyped-def]
    with styled():
        return response_figure(made).axes[1]


def corridors(panel) -> list[tuple[float, float]]:  # type: ignore[no-untyped-def]
    """Both ends of each corridor [kHz]."""
    bars = [patch for patch in panel.patches if patch.get_label() == "-3 dB, allowed"]
    return [(bar.get_x(), bar.get_x() + bar.get_width()) for bar in bars]


@pytest.mark.parametrize("plot", PLOTS)
def test_well_formed_without_script_date_or_outside_reference(plot: Plot) -> None:
    svg = plot(record())
    root = ElementTree.fromstring(svg)
    assert root.tag.endswith("svg")
    assert b"DOCTYPE" not in svg
    assert b"date" not in svg.lower()
    names = {element.tag.rpartition("}")[2] for element in root.iter()}
    assert "script" not in names
    links = [value for element in root.iter() for key, value in element.items() if key.endswith("href")]
    assert all(link.startswith("#") for link in links)
    assert not any(key.lower().startswith("on") for element in root.iter() for key in element.keys())  # noqa: SIM118


@pytest.mark.parametrize("plot", PLOTS)
def test_same_record_same_bytes(plot: Plot) -> None:
    first = plot(record())
    for _ in range(3):
        response_svg(long_record())
        assert plot(record()) == first


def test_same_bytes_in_another_process_and_under_other_settings() -> None:
    code = (
        "import sys, matplotlib\n"
        "matplotlib.rcParams['font.size'] = 20\n"
        "from synth.output.noise_plot import noise_svg\n"
        "from tests.support.records import record\n"
        "sys.stdout.buffer.write(noise_svg(record()))\n"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, check=True, timeout=120)
    assert run.stdout == noise_svg(record())


@pytest.mark.parametrize("plot", PLOTS)
def test_hostile_title_is_text(plot: Plot) -> None:
    svg = plot(record(HOSTILE))
    root = ElementTree.fromstring(svg)
    title = next(element for element in root.iter() if element.tag.endswith("title"))
    assert title.text == HOSTILE
    assert not any(element.tag.endswith("script") for element in root.iter())
    assert b"<script" not in svg


@pytest.mark.parametrize("plot", PLOTS)
@pytest.mark.parametrize("title", ["\u6f22\u5b57 \U0001f600 Pr\u00fcfger\u00e4t", "W" * 200, "x"])
def test_any_title_is_drawn_without_a_warning(plot: Plot, title: str) -> None:
    made = record()
    ElementTree.fromstring(plot(replace(made, spec=replace(made.spec, title=title))))


def test_long_title_ends_before_the_figure_does() -> None:
    with styled():
        figure = group_delay_figure(record("W" * 200))
        title = figure.texts[0]
        assert title.get_text().endswith("W...")
        assert title.get_window_extent().x1 <= figure.bbox.x1


def test_hostile_contributor_is_text() -> None:
    made = record()
    noise = made.verification.noise
    sources = tuple(replace(c, label=r"$\frac{" if k == 0 else c.label) for k, c in enumerate(noise.contributors))
    changed = replace(made, verification=replace(made.verification, noise=replace(noise, contributors=sources)))
    ElementTree.fromstring(noise_svg(changed))


def test_noise_without_contributors_or_level() -> None:
    made = record()
    noise = replace(made.verification.noise, contributors=(), inband_rms=0.0)
    ElementTree.fromstring(noise_svg(replace(made, verification=replace(made.verification, noise=noise))))


def test_settings_are_undone() -> None:
    before = dict(mpl.rcParams)
    response_svg(record())
    assert dict(mpl.rcParams) == before


def test_plotting_library_is_not_loaded_with_the_modules() -> None:
    code = (
        "import sys\n"
        "import synth.output.bill, synth.output.report, synth.output.response_plot\n"
        "import synth.output.noise_plot, synth.output.group_delay_plot\n"
        "assert 'matplotlib' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=120)


def test_stateful_interface_is_never_loaded() -> None:
    code = (
        "import sys\n"
        "from synth.output.response_plot import response_svg\n"
        "from tests.support.records import record\n"
        "response_svg(record())\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=120)


def test_realized_points_and_corridors_of_the_close_panel() -> None:
    made = record()
    lines = {line.get_label(): line for line in close_panel(made).get_lines()}
    found = made.verification.realized
    assert list(lines["-3 dB, realized"].get_xdata()) == [found.low_edge / 1e3, found.high_edge / 1e3]
    left, right = corridors(close_panel(made))
    inner, outer = right[0] - left[1], right[1] - left[0]
    assert (inner, outer) == (pytest.approx(4.5), pytest.approx(5.5))
    centre = lines["centre, allowed"].get_xdata()
    assert list(centre) == [98.75, 101.25]


def test_corridors_agree_with_the_verdict() -> None:
    """The bandwidth of the record is too large: both -3 dB points lie outside their corridors."""
    made = record()
    low, high = made.verification.realized.low_edge / 1e3, made.verification.realized.high_edge / 1e3
    left, right = corridors(close_panel(made))
    assert low < left[0]
    assert high > right[1]


def test_every_rejected_frequency_is_forbidden_and_named() -> None:
    with styled():
        wide = response_figure(record()).axes[0]
    assert sum(collection.get_hatch() is not None for collection in wide.collections) == 2
    assert wide.get_title(loc="left") == "whole sweep; down at least 56 dB at 50 kHz, 60 dB at 300 kHz"


def test_reject_close_to_the_band_is_in_both_panels() -> None:
    made = record()
    target = replace(made.spec.target, reject=(Reject(frequency=105e3, by=20.0),))
    panel = close_panel(replace(made, spec=replace(made.spec, target=target)))
    assert sum(collection.get_hatch() is not None for collection in panel.collections) == 1


def test_gain_at_the_centre_is_noted() -> None:
    with styled():
        subtitle = response_figure(record()).texts[1].get_text()
    assert "gain at 100 kHz: 503 kV/A (114.03 dB re 1 V/A)" in subtitle


@pytest.mark.parametrize("limit", [30e-6, 5e-3, None])
def test_group_delay_limit(limit: float | None) -> None:
    made = record()
    target = replace(made.spec.target, group_delay_variation=limit)
    with styled():
        axes = group_delay_figure(replace(made, spec=replace(made.spec, target=target))).axes[0]
    labels = axes.get_legend_handles_labels()[1]
    assert any(label.startswith("variation allowed") for label in labels) == (limit is not None)
    assert axes.get_ylim()[1] < 250  # [us] a generous limit does not flatten the curve


def test_largest_contributors_have_bars_and_figures() -> None:
    with styled():
        panel = noise_figure(record()).axes[1]
    assert len(panel.patches) == 8
    assert panel.texts[0].get_text() == "1.52 mV, 42 %"
    assert panel.texts[-1].get_text() == "74 uV, <1 %"


def test_frequency_ticks_are_engineering_text() -> None:
    with styled():
        figure = noise_figure(record())
        figure.canvas.draw()
        labels = [label.get_text() for label in figure.axes[0].get_xticklabels()]
    assert [label for label in labels if re.fullmatch(r"(100 Hz|100 kHz|10 MHz)", label)]


def test_scales_and_edges() -> None:
    assert [scale_for(x)[1] for x in (9.99e5, 1e6, 0.02, 3e-5, 1.0)] == ["k", "M", "m", "u", ""]
    low, high = band_edges(100e3, 5e3)
    assert high - low == pytest.approx(5e3)
    assert low * high == pytest.approx(100e3**2)
