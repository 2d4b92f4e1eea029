"""What holds for every section circuit: equations, amplifier effects, rounding, DC paths, trimming, simulators."""

from __future__ import annotations

import pytest

from synth.topology import SECTIONS, SectionTopology
from tests.topology import placed

TRIMS_FREQUENCY_ALONE = [t for name, t in SECTIONS.items() if name not in ("delyiannis-friend", "multiple-feedback")]


@pytest.fixture(params=SECTIONS.values(), ids=list(SECTIONS))
def topology(request: pytest.FixtureRequest) -> SectionTopology:
    found: SectionTopology = request.param
    return found


@pytest.mark.parametrize("seed", range(12))
def test_round_trip(topology: SectionTopology, seed: int) -> None:
    placed.check_round_trip(topology, seed)


@pytest.mark.parametrize("q", [5.0, 20.0])
def test_amplifier_effects_are_those_of_the_circuit(topology: SectionTopology, q: float) -> None:
    placed.check_amplifier_effects(topology, q)


@pytest.mark.parametrize("q", [3.0, 20.0])
def test_noise_gain_is_that_of_the_circuit(topology: SectionTopology, q: float) -> None:
    placed.check_noise_gain(topology, q)


@pytest.mark.parametrize("seed", range(10))
def test_rounding_reaches_the_target_with_real_amplifiers(topology: SectionTopology, seed: int) -> None:
    placed.check_rounding(topology, seed)


def test_every_input_has_a_dc_path(topology: SectionTopology) -> None:
    placed.check_dc_paths(topology)


@pytest.mark.spice
def test_simulators_agree(topology: SectionTopology) -> None:
    placed.check_simulators(topology)


@pytest.mark.parametrize("topology", TRIMS_FREQUENCY_ALONE, ids=lambda t: t.name, indirect=False)
def test_trimmer_leaves_bandwidth_and_gain(topology: SectionTopology) -> None:
    placed.check_trimmer(topology)
