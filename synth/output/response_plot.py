"""The response beside its limits: the whole sweep, and the band close up."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from synth.model.judgement import Requirement
from synth.model.record import DesignRecord
from synth.output.figure import (
    BAND,
    BAND_EDGE,
    CURVE,
    INK,
    MARK,
    add_legend,
    add_panel,
    band_edges,
    log_frequency_axis,
    new_figure,
    scale_for,
    styled,
    svg_bytes,
)
from synth.quantity import format_si

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

HALF_POWER = -3.0103  # [dB]
CLOSE_SPAN = 4.0  # bandwidths either side of the centre, in f/f0 - f0/f
_DEEPEST = -160.0  # [dB] the wide panel shows no less
_CROWDED = 0.22  # share of the close panel that a label beside a -3 dB point takes
_REJECT_WIDTH = 0.035  # of a forbidden bar, share of a decade, either side


def response_svg(record: DesignRecord) -> bytes:
    """Gain relative to the centre, wide and close, with every limit of the spec on it, as SVG."""
    with styled():
        return svg_bytes(response_figure(record), record.spec.title)


def response_figure(record: DesignRecord) -> Figure:
    """The figure behind `response_svg`; build and write it under `figure.styled()`."""
    figure = new_figure(record.spec.title, _subtitle(record), 11.0, 5.2)
    wide = add_panel(figure, 0.75, 5.65, _wide_title(record))
    close = add_panel(figure, 6.3, 10.75, "close to the centre")
    _wide_panel(wide, record)
    _close_panel(close, record)
    add_legend(figure, (close, wide))
    return figure


def relative_gain(record: DesignRecord) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """Gain relative to the one at the centre [dB], on the response's grid."""
    response = record.verification.response
    center = int(np.argmin(np.abs(response.frequency - record.spec.target.center_frequency)))
    relative: np.ndarray[tuple[int], np.dtype[np.float64]] = response.gain_db - response.gain_db[center]
    return relative


def close_range(record: DesignRecord) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    """Which points of the grid are within a few bandwidths of the centre."""
    target, f = record.spec.target, record.verification.response.frequency
    detuning = np.abs(f / target.center_frequency - target.center_frequency / f)
    inside: np.ndarray[tuple[int], np.dtype[np.bool_]] = (
        detuning <= CLOSE_SPAN * target.bandwidth / target.center_frequency
    )
    return inside


def _subtitle(record: DesignRecord) -> str:
    found, unit = record.verification.realized, record.spec.input_unit
    gain = 10 ** (found.gain_db / 20)
    center = format_si(record.spec.target.center_frequency, "Hz", 6)
    return (
        f"gain at {center}: {format_si(gain, 'V')}/{unit} ({found.gain_db:.2f} dB re 1 V/{unit}); "
        f"bandwidth {format_si(found.bandwidth, 'Hz')} around {format_si(found.center_frequency, 'Hz', 6)}"
    )


def _wide_panel(axes: Axes, record: DesignRecord) -> None:
    f, gain = record.verification.response.frequency, relative_gain(record)
    log_frequency_axis(axes, float(f[0]), float(f[-1]))
    bottom = max(_DEEPEST, float(gain[np.isfinite(gain)].min()))
    bottom = min(20 * np.floor(bottom / 20), -20 * np.ceil((_deepest_limit(record) + 10) / 20))
    axes.set_ylim(bottom, 10)
    axes.plot(f, np.maximum(gain, bottom - 20), color=CURVE, linewidth=1.6)
    axes.set_ylabel("gain relative to the centre (dB)")
    for reject in record.spec.target.reject:
        left, right = (reject.frequency * 10 ** (side * _REJECT_WIDTH) for side in (-1, 1))
        _forbid(axes, left, right, -reject.by, 10)


def _wide_title(record: DesignRecord) -> str:
    """Names the limits above the panel: beside the bars they would run into each other."""
    ordered = sorted(record.spec.target.reject, key=lambda reject: reject.frequency)
    limits = [f"{format_si(r.by, 'dB')} at {format_si(r.frequency, 'Hz')}" for r in ordered]
    return f"whole sweep; down at least {', '.join(limits)}" if limits else "whole sweep"


def _close_panel(axes: Axes, record: DesignRecord) -> None:
    inside, target, found = close_range(record), record.spec.target, record.verification.realized
    f, gain = record.verification.response.frequency[inside], relative_gain(record)[inside]
    scale, prefix = scale_for(target.center_frequency)
    bottom = min(-20.0, 10 * np.floor(float(gain.min()) / 10))
    top = 2.0 if gain.max() < 1.5 else 5 * np.ceil((float(gain.max()) + 1) / 5)
    axes.set_xlim(f[0] / scale, f[-1] / scale)
    axes.set_ylim(bottom, top)
    axes.plot(f / scale, gain, color=CURVE, linewidth=1.8, label="response", zorder=2.5)
    edges = (found.low_edge, found.high_edge)
    places = [edge / scale for edge in edges]
    axes.plot(places, [HALF_POWER] * 2, "o", color=MARK, markersize=6, markeredgecolor="white", zorder=3,
              label="-3 dB, realized")  # fmt: skip
    _allowed(axes, record, scale, bottom, top)
    for edge, side in zip(edges, (-1, 1), strict=True):
        share = (edge - f[0]) / (f[-1] - f[0])
        crowded = share < _CROWDED if side < 0 else share > 1 - _CROWDED  # then the label goes inside, under the curve
        away = (-8 * side, -11) if crowded else (18 * side, 0)
        _note(axes, format_si(edge, "Hz", 5), (edge / scale, HALF_POWER), away)
    for reject in target.reject:
        if f[0] < reject.frequency < f[-1]:
            half = 0.008 * (f[-1] - f[0])
            _forbid(axes, (reject.frequency - half) / scale, (reject.frequency + half) / scale, -reject.by, top)
    axes.set_xlabel(f"frequency ({prefix}Hz)")


def _allowed(axes: Axes, record: DesignRecord, scale: float, bottom: float, top: float) -> None:
    """Corridors that the -3 dB points have to hit for the bandwidth, and the range allowed to the centre."""
    middle = record.verification.realized.center_frequency
    bandwidth = _named(record, "bandwidth")
    if bandwidth is not None and bandwidth.at_least is not None and bandwidth.at_most is not None:
        smallest, largest = band_edges(middle, bandwidth.at_least), band_edges(middle, bandwidth.at_most)
        for near, far in zip(smallest, largest, strict=True):
            ends = sorted((near / scale, far / scale))
            axes.axvspan(ends[0], ends[1], color=BAND, linewidth=0, label="-3 dB, allowed")
    center = _named(record, "center frequency")
    if center is not None and center.at_least is not None and center.at_most is not None:
        height = bottom + 0.03 * (top - bottom)
        axes.plot([center.at_least / scale, center.at_most / scale], [height] * 2, "|-", color=BAND_EDGE, linewidth=1.4,
                  markersize=7, label="centre, allowed")  # fmt: skip
        axes.plot([middle / scale], [height], "D", color=MARK, markersize=4, zorder=3, label="centre, realized")


def _forbid(axes: Axes, left: float, right: float, limit: float, top: float) -> None:
    """A hatched bar over the level that the response must not exceed there, its limit as a heavy stroke."""
    axes.fill_between(
        [left, right], limit, top, facecolor="none", edgecolor=MARK, hatch="//////", linewidth=0.8, label="forbidden"
    )
    axes.plot([left, right], [limit, limit], color=MARK, linewidth=2.2, solid_capstyle="butt")


def _note(axes: Axes, text: str, at: tuple[float, float], away: tuple[float, float]) -> None:
    """A small label, `away` points from a place, on the side that it is moved to."""
    axes.annotate(
        text, at, away, textcoords="offset points", ha="left" if away[0] > 0 else "right", va="center", size=8,
        color=INK, bbox={"facecolor": "white", "edgecolor": "none", "pad": 1},
    )  # fmt: skip


def _deepest_limit(record: DesignRecord) -> float:
    return max((reject.by for reject in record.spec.target.reject), default=30.0)


def _named(record: DesignRecord, name: str) -> Requirement | None:
    return next((r for r in record.verification.requirements if r.name == name), None)
