"""A timeline walked in closed form, stretch by stretch, at several rotations at once.

Every stretch continues from the state the last one left. The equations are those of
`livelag.circuit.network`, here for (rotations,) networks side by side.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.timeline import Stretch, Timeline
from livelag.circuit.network import Matrix, Vector
from livelag.circuit.stage import GlideStage, Setting

Cube = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Step:
    """One stretch, walked.

    Attributes:
        stretch: what was held.
        weights: (rotations, modes) size of each decay at its start, V on the bus.
        poles: (rotations, modes) in 1/s.
        left_v: (rotations,) bus volts less settled bus volts at its end.
    """

    stretch: Stretch
    weights: Matrix
    poles: Matrix
    left_v: Vector


@dataclass(frozen=True, slots=True)
class _Networks:
    """One position of switch and bypass at every rotation; the first axis is the rotation."""

    bias_v: Vector
    gain: Vector
    poles: Matrix
    settled: Matrix
    readout: Matrix
    to_modes: Cube
    to_volts: Cube
    source_to_volts: Matrix


def walk(stage: GlideStage, timeline: Timeline, rotations: Sequence[float]) -> Iterator[Step]:
    """Walk a timeline from rest on its first note.

    Args:
        stage: the stage.
        timeline: what is played.
        rotations: where the pot stands, until the song turns it.
    """
    known: dict[tuple[int, bool, float | None], _Networks] = {}
    rest = timeline.stretches[timeline.opening]
    closed = rest.range_index
    settings = _settings(rest, rotations)
    state: Matrix = np.stack(
        [stage.settled_state(timeline.first_key_volts, setting) for setting in settings]
    )
    for stretch in timeline.stretches[timeline.opening :]:
        if stretch.range_index != closed:
            closed = stretch.range_index
            state = np.stack([stage.wiring.share_charge(row, closed) for row in state])
        key = (stretch.range_index, stretch.bypassed, stretch.rotation)
        if key not in known:
            known[key] = _networks(stage, _settings(stretch, rotations))
        networks = known[key]
        if stretch.jump_volts is not None:
            bus = networks.gain * _source(stage, networks, stretch.jump_volts)
            state = np.stack(
                [stage.wiring.jump(row, closed, v) for row, v in zip(state, bus, strict=True)]
            )
        source = _source(stage, networks, stretch.key_volts)
        settled = networks.settled * source[:, None]
        away = np.matmul(networks.to_modes, state[:, :, None])[:, :, 0] - settled
        weights = networks.readout * away
        decay = np.exp(networks.poles * stretch.duration_s)
        state = np.matmul(networks.to_volts, (settled + away * decay)[:, :, None])[:, :, 0]
        state += networks.source_to_volts * source[:, None]
        yield Step(stretch, weights, networks.poles, (weights * decay).sum(axis=1))


def _settings(stretch: Stretch, rotations: Sequence[float]) -> list[Setting]:
    turns = rotations if stretch.rotation is None else [stretch.rotation] * len(rotations)
    return [Setting(stretch.range_index, turn, stretch.bypassed) for turn in turns]


def _source(stage: GlideStage, networks: _Networks, key_volts: float) -> Vector:
    # Bypassed there is no resistance, so this is the input buffer's output alone.
    buffered = stage.source_volts(key_volts, Setting(bypassed=True))
    return buffered - networks.bias_v


def _networks(stage: GlideStage, settings: Sequence[Setting]) -> _Networks:
    found = [stage.network(setting) for setting in settings]
    resistances = np.array([stage.resistance_ohms(setting) for setting in settings])
    return _Networks(
        bias_v=stage.output_buffer.bias_a * resistances,
        gain=np.array([network.gain for network in found]),
        poles=np.stack([network.poles for network in found]),
        settled=np.stack([network.settled_modes(1.0) for network in found]),
        readout=np.stack([network.readout for network in found]),
        to_modes=np.stack([network.to_modes for network in found]),
        to_volts=np.stack([network.to_volts for network in found]),
        source_to_volts=np.stack([network.source_to_volts for network in found]),
    )
