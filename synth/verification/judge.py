"""Judges any chain against any spec; knows nothing of how the chain was chosen."""

from __future__ import annotations

import math

import numpy as np

from synth import circuit
from synth.circuit.sensor_figures import sensor_figures, stage_gain
from synth.model.chain import Chain, Stage
from synth.model.judgement import Realized, SensorModel, StageResult, Verification
from synth.spec import Spec
from synth.verification.builds.judge import judge_builds
from synth.verification.cautions import cautions
from synth.verification.coupling import layout_demands
from synth.verification.figures import noise_table, realized, response_table
from synth.verification.headroom import Excursion, excursions, output_noise
from synth.verification.requirements import derived, judged, not_judged

DROWNED = 6.0  # [dB] over the noise: a smallest reading that stands no higher is told
MARGIN_SPAN = (1e-3, 1e5)  # of the centre: where loop gains are searched for their unity crossings


def verify(chain: Chain, spec: Spec, builds: int = 0, seed: int = 0, layout: bool = False) -> Verification:
    """All figures of a chain and the verdict on every requirement.

    Args:
        builds: how many builds to draw, 0 for the nominal one alone; seed: of the draws.
        layout: whether the demands on the layout are worked out, too.

    Raises:
        CircuitError: the chain has no solution, or is no bandpass.
    """
    network = circuit.build_network(chain)
    center = spec.target.center_frequency
    table = response_table(network, center, spec.target.bandwidth)
    band = realized(network, table, spec)
    noise = noise_table(network, table, band, spec)
    found = excursions(chain, network, spec, output_noise(chain, network))
    margins = circuit.phase_margins(network, center * MARGIN_SPAN[0], center * MARGIN_SPAN[1])
    requirements = (*judged(spec, network, table, band, noise), *derived(found, margins, band))
    drawn = None
    if builds > 0:
        requirements, drawn = judge_builds(chain, spec, requirements, builds, seed)
    requirements = (*requirements, *not_judged(spec, drawn is not None))
    model = sensor_figures(chain.sensor, chain.center_frequency)
    pairs = match_pairs(chain, band, model)
    stages = _stage_results(chain, network, pairs, found, margins, spec.target.full_scale)
    said = cautions(spec, chain, requirements, drawn is not None)
    if spec.target.signal_to_noise is None and noise.smallest_reading_snr_db < DROWNED:
        found_at = f"{noise.smallest_reading_snr_db:+.1f} dB from the noise in the band"
        said = (f"the smallest reading stands {found_at}: it drowns; ask target.signal_to_noise", *said)
    demands = layout_demands(chain, network, spec) if layout else ()
    return Verification(
        table, noise, band, model, stages, requirements, said, drawn, demands
    )


def _stage_results(
    chain: Chain,
    network: circuit.Network,
    pairs: dict[str, tuple[float, float]],
    found: tuple[Excursion, ...],
    margins: tuple[circuit.Margin, ...],
    full_scale: float,
) -> tuple[StageResult, ...]:
    voltages = circuit.node_voltages(network, [chain.center_frequency])[0]
    index = {node: k for k, node in enumerate(network.unknowns)}
    excursion = {e.ref: e for e in found}
    margin = {m.ref: m for m in margins}
    results = []
    for stage in chain.stages:
        if stage.kind == "reference":
            results.append(_reference_result(stage, voltages[index[stage.output_node]], full_scale, margin))
            continue
        ratio = stage_gain(chain, stage, network, chain.center_frequency)
        refs = [r for r in stage.parts if chain.part(r).kind == "op-amp"]
        fullest = max(refs, key=lambda r: excursion[r].peak)
        loop = min((margin[r] for r in refs), key=lambda m: m.phase_margin)
        f0, q = pairs.get(stage.name, (None, None))
        sign = 1.0 if ratio.real >= 0 else -1.0
        results.append(
            StageResult(
                stage.name,
                sign * float(abs(ratio)),
                f0,
                q,
                excursion[fullest].level,
                excursion[fullest].peak,
                loop.phase_margin if loop.crossing is not None else None,
            )
        )
    return tuple(results)


def _reference_result(
    stage: Stage, voltage: complex, full_scale: float, margin: dict[str, circuit.Margin]
) -> StageResult:
    """A mid-rail has no gain; its level is what the stages leave on it at full scale."""
    level = float(abs(voltage)) * full_scale
    loop = next((margin[ref] for ref in stage.parts if ref in margin), None)
    phase = loop.phase_margin if loop is not None and loop.crossing is not None else None
    return StageResult(stage.name, 0.0, None, None, level, math.sqrt(2) * level, phase)


def match_pairs(chain: Chain, band: Realized, sensor: SensorModel) -> dict[str, tuple[float, float]]:
    """Which realized pole pair belongs to which bandpass section: the nearest in frequency and Q, each used once.

    A sensor that resonates has pairs of its own in the chain; they are set aside first.
    """
    pairs = list(circuit.resonant_pairs(np.array(band.poles)))
    for own in circuit.resonant_pairs(np.array(sensor.poles)):
        if pairs:
            pairs.remove(min(pairs, key=lambda pair: _distance(own, pair)))
    sections = [stage for stage in chain.stages if stage.kind == "bandpass"]
    found: dict[str, tuple[float, float]] = {}
    for stage in sorted(sections, key=lambda s: (-(s.target.q or 0.0), s.target.center_frequency or 0.0)):
        assert stage.target.center_frequency is not None
        assert stage.target.q is not None
        wanted = (stage.target.center_frequency, stage.target.q)
        best = min(pairs, key=lambda pair: _distance(wanted, pair), default=None)
        if best is not None:
            pairs.remove(best)
            found[stage.name] = best
    return found


def _distance(wanted: tuple[float, float], pair: tuple[float, float]) -> float:
    f0, q = wanted
    return abs(math.log(pair[0] / f0)) * q + abs(math.log(abs(pair[1]) / q))

