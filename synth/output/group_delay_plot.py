"""Group delay close to the centre, the part of it that carries the signal, and what it may vary there."""

from __future__ import annotations

from typing import TYPE_CHECKING

from synth.model.record import DesignRecord
from synth.output.figure import (
    BAND,
    BAND_EDGE,
    CURVE,
    MARK,
    add_legend,
    add_panel,
    band_edges,
    new_figure,
    scale_for,
    styled,
    svg_bytes,
)
from synth.output.response_plot import close_range
from synth.quantity import format_si

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def group_delay_svg(record: DesignRecord) -> bytes:
    """Group delay in the close range, the central half of the bandwidth marked, with its limit, as SVG."""
    with styled():
        return svg_bytes(group_delay_figure(record), record.spec.title)


def group_delay_figure(record: DesignRecord) -> Figure:
    """The figure behind `group_delay_svg`; build and write it under `figure.styled()`."""
    target, response, inside = record.spec.target, record.verification.response, close_range(record)
    f, delay = response.frequency[inside], response.group_delay[inside]
    left, right = band_edges(target.center_frequency, target.bandwidth / 2)
    central = delay[(f >= left) & (f <= right)]
    low, high = float(central.min()), float(central.max())
    subtitle = f"group delay over the central half of the bandwidth: {format_si(low, 's')} to {format_si(high, 's')}"
    figure = new_figure(record.spec.title, subtitle, 8.0, 4.6)
    axes = add_panel(figure, 0.75, 7.75, "close to the centre")
    hertz, kilo = scale_for(target.center_frequency)
    seconds, micro = scale_for(float(delay.max()))
    axes.set_xlim(f[0] / hertz, f[-1] / hertz)
    axes.axvspan(left / hertz, right / hertz, color=BAND, linewidth=0, label="central half of the bandwidth")
    limit = target.group_delay_variation
    if limit is not None:
        ends = [left / hertz, right / hertz]
        for level in (low, low + limit):
            axes.plot(ends, [level / seconds] * 2, color=BAND_EDGE, linewidth=1.6, linestyle=(0, (4, 2)),
                      label=f"variation allowed: {format_si(limit, 's')}" if level == low else None)  # fmt: skip
    axes.plot(f / hertz, delay / seconds, color=CURVE, linewidth=1.8, label="group delay")
    middle = int(abs(f - target.center_frequency).argmin())
    axes.plot([f[middle] / hertz], [delay[middle] / seconds], "o", color=MARK, markersize=6, markeredgecolor="white",
              label=f"at the centre: {format_si(float(delay[middle]), 's')}")  # fmt: skip
    top = max(float(delay.max()), min(low + (limit or 0.0), 2 * float(delay.max())))  # a generous limit stays outside
    axes.set_ylim(min(0.0, 1.05 * float(delay.min()) / seconds), 1.08 * top / seconds)
    axes.set_xlabel(f"frequency ({kilo}Hz)")
    axes.set_ylabel(f"group delay ({micro}s)")
    add_legend(figure, (axes,))
    return figure
