"""Settling of the envelope after a step of the signal at the centre.

The complex envelope of the output is the response of H(f0 + d) to a step; it is taken over a long on-off pulse by the
discrete Fourier transform, the spectrum faded out far from the band (A. V. Oppenheim, R. W. Schafer, Discrete-Time
Signal Processing; equivalent baseband of a bandpass, from memory).
"""

from __future__ import annotations

import numpy as np

from synth import circuit
from synth.circuit.network import FloatArray
from synth.errors import CircuitError

SPAN = 80.0  # bandwidths either side of the centre, as far as the centre allows
PULSE = 25.0  # least length of the pulse, in reciprocals of the bandwidth
FADE = 0.2  # share of the span over which the spectrum is faded out
MOST_POINTS = 1 << 16


def envelope_step(
    network: circuit.Network, center: float, bandwidth: float, length: float
) -> tuple[FloatArray, FloatArray]:
    """Time [s] and envelope of the output after a step of the signal, over its final value.

    Args:
        center, bandwidth: [Hz]; length: [s] how long to look, at least.
    """
    length = max(length, PULSE / bandwidth)
    span = min(SPAN * bandwidth, center * (1 - 1e-6))
    points = int(2 * np.ceil(2 * span * length))
    if points > MOST_POINTS:
        raise CircuitError(
            f"settling within {length:.3g} s is too long to follow at a bandwidth of {bandwidth:.6g} Hz; "
            f"ask for less than {MOST_POINTS / (4 * span):.3g} s"
        )
    offsets = np.fft.fftshift(np.fft.fftfreq(points, 1 / (2 * span)))
    inside = offsets > -span * (1 - 1e-9)
    h = np.zeros(points, dtype=complex)
    h[inside] = circuit.batch_response(network, network.values[:, None], center + offsets[inside])[:, 0]
    edge = np.clip((1 - np.abs(offsets) / span) / FADE, 0, 1)
    h *= 0.5 - 0.5 * np.cos(np.pi * edge)
    pulse = np.zeros(points)
    pulse[: points // 2] = 1.0
    output = np.fft.ifft(np.fft.ifftshift(h) * np.fft.fft(pulse))
    middle = 0.5  # the pulse rises half a sample before its first
    time = np.asarray((np.arange(points // 2) + middle) / (2 * span), dtype=float)
    final = abs(circuit.response(network, [center])[0])
    return time, np.abs(output[: points // 2]) / final


def settling_time(network: circuit.Network, center: float, bandwidth: float, within: float, to: float) -> float:
    """Time [s] after which the envelope stays within the share `to` of its final value."""
    time, envelope = envelope_step(network, center, bandwidth, 1.5 * within)
    outside = np.flatnonzero(np.abs(envelope - 1) > to)
    if outside.size == 0:
        return 0.0
    return float(time[min(int(outside[-1]) + 1, time.size - 1)])
