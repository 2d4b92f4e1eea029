"""Noise at the output: its density over the sweep, and where the noise in the band comes from."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from synth.model.record import DesignRecord
from synth.output.figure import (
    BAND,
    CURVE,
    INK,
    REST,
    add_legend,
    add_panel,
    engineering_ticks,
    log_frequency_axis,
    new_figure,
    scale_for,
    shown,
    styled,
    svg_bytes,
)
from synth.output.text import level_text, percent_text
from synth.quantity import format_si

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_CONTRIBUTORS = 8
_LABEL_LENGTH = 26
_DECADES = 6.0  # the density panel shows no more below its maximum


def noise_svg(record: DesignRecord) -> bytes:
    """Output noise density with the chain's band marked, and the largest contributors in that band, as SVG."""
    with styled():
        return svg_bytes(noise_figure(record), record.spec.title)


def noise_figure(record: DesignRecord) -> Figure:
    """The figure behind `noise_svg`; build and write it under `figure.styled()`."""
    noise, unit = record.verification.noise, record.spec.input_unit
    inband, overall = format_si(noise.inband_rms, "V", 3), format_si(noise.output_rms, "V", 3)
    density_in = format_si(noise.input_density_at_center, unit, 3)
    subtitle = (
        f"output noise in band {inband} rms, overall {overall}; at the input {density_in}/rtHz; "
        f"smallest reading {level_text(noise.smallest_reading_snr_db)} it"
    )
    figure = new_figure(record.spec.title, subtitle, 11.0, 4.8)
    density = add_panel(figure, 0.85, 5.6, "total density")
    sources = add_panel(figure, 7.55, 10.75, "largest sources, rms in band")
    _density_panel(density, record)
    _contributor_panel(sources, record)
    add_legend(figure, (density,))
    return figure


def _density_panel(axes: Axes, record: DesignRecord) -> None:
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    noise, found = record.verification.noise, record.verification.realized
    log_frequency_axis(axes, float(noise.frequency[0]), float(noise.frequency[-1]))
    top = float(noise.density.max())
    bottom = max(float(noise.density.min()), top * 10**-_DECADES)
    axes.set_yscale("log")
    axes.set_ylim(10 ** np.floor(np.log10(0.8 * bottom)), 3 * top)
    axes.yaxis.set_major_locator(LogLocator(10, numticks=20))
    axes.yaxis.set_major_formatter(FuncFormatter(engineering_ticks("V")))
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.axvspan(found.low_edge, found.high_edge, color=BAND, linewidth=1.5, label="band of the chain, -3 dB")
    axes.plot(noise.frequency, noise.density, color=CURVE, linewidth=1.6, label="all sources")
    axes.set_ylabel("density at the output (per rtHz)")


def _contributor_panel(axes: Axes, record: DesignRecord) -> None:
    noise = record.verification.noise
    top = noise.contributors[:_CONTRIBUTORS]
    if not top or top[0].inband_rms <= 0:
        axes.set_axis_off()
        return
    scale, prefix = scale_for(top[0].inband_rms)
    places = np.arange(len(top))
    levels = [contributor.inband_rms / scale for contributor in top]
    axes.barh(places, levels, height=0.62, color=[CURVE] + [REST] * (len(top) - 1))
    for place, contributor, level in zip(places, top, levels, strict=True):
        share = percent_text((contributor.inband_rms / noise.inband_rms) ** 2) if noise.inband_rms else "-"
        text = f"{format_si(contributor.inband_rms, 'V', 3)}, {share}"
        axes.annotate(text, (level, place), (4, 0), textcoords="offset points", va="center", size=8, color=INK)
    axes.set_yticks(places, [shown(contributor.label, _LABEL_LENGTH) for contributor in top])
    for label in axes.get_yticklabels():
        label.set_parse_math(False)
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(max(len(top), 4) - 0.4, -0.6)
    axes.set_xlim(0, 1.4 * levels[0])
    axes.grid(visible=False)
    axes.set_xlabel(f"noise in the band ({prefix}V rms)")
