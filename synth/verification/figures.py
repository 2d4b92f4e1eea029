"""Figures of the nominal chain: grids, realized centre and bandwidth, ripple, group delay variation, noise."""

from __future__ import annotations

import math

import numpy as np

from synth import circuit
from synth.errors import CircuitError
from synth.model.chain import Chain
from synth.model.judgement import Contributor, FloatArray, NoiseTable, Realized, ResponseTable
from synth.spec import Spec

CLOSE_POINTS = 301
WIDE_POINTS_PER_DECADE = 60
DECADES = 3  # either side of the centre
CLOSE_SPAN = 10.0  # bandwidths either side, in f/f0 - f0/f
CROWDING = 3.0  # how much denser the close grid is at the centre


def detuned(center: float, u: FloatArray | float) -> FloatArray:
    """Frequency [Hz] at which f/f0 - f0/f = u."""
    half = np.asarray(u) / 2
    f: FloatArray = center * (half + np.sqrt(1 + half**2))
    return f


def close_grid(center: float, bandwidth: float) -> FloatArray:
    """Frequencies [Hz] with |f/f0 - f0/f| <= 10 B/f0, denser towards the centre, which is among them."""
    t = np.linspace(-1, 1, CLOSE_POINTS)
    u = CLOSE_SPAN * bandwidth / center * np.sinh(CROWDING * t) / math.sinh(CROWDING)
    f = detuned(center, u)
    f[CLOSE_POINTS // 2] = center
    return f


def response_table(network: circuit.Network, center: float, bandwidth: float) -> ResponseTable:
    """Response and group delay on the wide and close grids, merged."""
    low, high = center * 10.0**-DECADES, center * 10.0**DECADES
    wide = np.geomspace(low, high, 2 * DECADES * WIDE_POINTS_PER_DECADE + 1)
    close = close_grid(center, bandwidth)
    close = close[(close >= low) & (close <= high)]
    apart = np.abs(wide[:, None] / close[None, :] - 1).min(axis=1) > 1e-6  # nine digits keep neighbours distinct
    f = np.concatenate([wide[apart], close])
    order = np.argsort(f, kind="stable")
    is_close = np.concatenate([np.zeros(int(apart.sum()), dtype=bool), np.ones(close.size, dtype=bool)])[order]
    gain, delay = circuit.response_and_delay(network, f[order])
    return ResponseTable(f[order], gain, delay, is_close)


def realized(network: circuit.Network, table: ResponseTable, spec: Spec, with_poles: bool = True) -> Realized:
    """Centre, bandwidth and gains of the chain, the -3 dB points solved for, not interpolated.

    Raises:
        CircuitError: the gain does not fall 3 dB below its value at the centre on both sides.
    """
    center = spec.target.center_frequency
    at_center = _at(table, center)
    level = np.abs(table.gain) / abs(at_center)
    middle = int(np.searchsorted(table.frequency, center))
    above = np.flatnonzero(level[middle:] < math.sqrt(0.5))
    below = np.flatnonzero(level[:middle] < math.sqrt(0.5))
    if above.size == 0 or below.size == 0:
        side = "below" if below.size == 0 else "above"
        raise CircuitError(f"the chain has no -3 dB point {side} its centre; it is not a bandpass")
    f, up, down = table.frequency, middle + int(above[0]), int(below[-1])
    high = _crossing(network, abs(at_center), float(f[up - 1]), float(f[up]))
    low = _crossing(network, abs(at_center), float(f[down]), float(f[down + 1]))
    terminal = abs(at_center) / spec.sensor.scale
    return Realized(
        math.sqrt(low * high),
        high - low,
        low,
        high,
        20 * math.log10(abs(at_center)),
        20 * math.log10(terminal),
        tuple(complex(p) for p in circuit.poles(network, center)) if with_poles else (),
    )


def nominal_band(chain: Chain, spec: Spec) -> Realized:
    """Centre, bandwidth and gains of a chain, without the rest of its verdict."""
    network, center = circuit.build_network(chain), spec.target.center_frequency
    f = close_grid(center, spec.target.bandwidth)
    gain = circuit.batch_response(network, network.values[:, None], f)[:, 0]
    nothing = np.zeros(f.size)
    return realized(network, ResponseTable(f, gain, nothing, nothing == 0), spec, with_poles=False)


def _at(table: ResponseTable, frequency: float) -> complex:
    k = int(np.argmin(np.abs(table.frequency - frequency)))
    return complex(table.gain[k])


def _crossing(network: circuit.Network, center_gain: float, low: float, high: float) -> float:
    """Frequency between two grid points at which the gain is 3 dB below the centre's."""
    for _ in range(3):
        grid = np.linspace(low, high, 33)
        under = np.abs(circuit.response(network, grid)) < center_gain * math.sqrt(0.5)
        k = int(np.flatnonzero(under[1:] != under[:-1])[0])
        low, high = float(grid[k]), float(grid[k + 1])
    ends = np.abs(circuit.response(network, [low, high])) / center_gain
    return float(low + (high - low) * (math.sqrt(0.5) - ends[0]) / (ends[1] - ends[0]))


def ripple(table: ResponseTable, low: float, high: float) -> float:
    """Peak to valley of the gain between its outermost maxima in the band [dB]; 0 for a single peak."""
    inside = (table.frequency >= low) & (table.frequency <= high)
    level = table.gain_db[inside]
    peaks = np.flatnonzero((level[1:-1] >= level[:-2]) & (level[1:-1] > level[2:])) + 1
    if peaks.size < 2:
        return 0.0
    between = level[peaks[0] : peaks[-1] + 1]
    return float(between.max() - between.min())


def delay_variation(network: circuit.Network, center: float, bandwidth: float) -> float:
    """Largest less smallest group delay over the central half of the bandwidth [s]."""
    span = detuned(center, np.linspace(-0.5, 0.5, 101) * bandwidth / center)
    _, delay = circuit.response_and_delay(network, span)
    return float(delay.max() - delay.min())


def rejection(network: circuit.Network, center: float, frequency: float) -> float:
    """Gain at the centre over the gain at a frequency [dB]."""
    h = np.abs(circuit.response(network, [center, frequency]))
    if h[1] == 0:
        raise CircuitError(f"the chain passes nothing at {frequency:.6g} Hz; its rejection there has no figure")
    return float(20 * np.log10(h[0] / h[1]))


def noise_table(network: circuit.Network, table: ResponseTable, band: Realized, spec: Spec) -> NoiseTable:
    """Output noise on the response's grid, in the chain's band and overall, contributors sorted."""
    spectrum = circuit.noise(network, table.frequency)
    f = spectrum.frequencies
    center = int(np.argmin(np.abs(f - spec.target.center_frequency)))
    inband = circuit.integrated(f, spectrum.density, band.low_edge, band.high_edge)
    contributors = [
        Contributor(label, float(row[center]), circuit.integrated(f, row, band.low_edge, band.high_edge))
        for label, row in zip(spectrum.labels, spectrum.contributions, strict=True)
    ]
    contributors.sort(key=lambda c: (-float(f"{c.inband_rms:.9g}"), c.label))
    gain = float(np.abs(table.gain[center]))
    return NoiseTable(
        f,
        spectrum.density,
        circuit.integrated(f, spectrum.density, float(f[0]), float(f[-1])),
        inband,
        float(spectrum.density[center]) / gain,
        20 * math.log10(gain * spec.target.smallest / inband),
        tuple(contributors),
    )
