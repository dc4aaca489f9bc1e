"""The glide stage: parts in their places, and everything that can be asked of them on paper.

Source side u -> input buffer -> series resistor -> time pot -> bus with the capacitors that the
range switch connects -> output buffer -> output resistor -> load.

| symbol  | name here              | meaning                                            | unit |
|---------|------------------------|----------------------------------------------------|------|
| u       | ``key_volts``          | control voltage before the glide                   | V    |
| v       | ``glide_volts``        | control voltage after the glide                    | V    |
| R       | ``resistance_ohms``    | series resistor + pot at its rotation              | ohm  |
| C       | ``capacitance_f``      | sum of the connected capacitors                    | F    |
| tau     | ``time_constant_s``    | R C                                                | s    |
| I_b     | ``bias_a``             | bias current that the output buffer draws from the bus | A |
| V_os    | ``offset_v``           | offset of a buffer                                 | V    |
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from livelag.circuit.decay import last_time_outside
from livelag.circuit.network import LinearNetwork, Vector
from livelag.circuit.parts import (
    Buffer,
    Capacitor,
    Pot,
    Resistor,
    require,
    require_name,
    require_positive,
)
from livelag.circuit.wiring import Wiring
from livelag.errors import InputError, UnknownNameError
from livelag.units import cents_to_volts, note_to_volts, volts_to_note

Volts = TypeVar("Volts", float, NDArray[np.float64])

ARRIVAL_TOLERANCE_CENTS = 5.0


@dataclass(frozen=True, slots=True)
class Supply:
    """The rails, in volts; a single supply has its negative rail at 0.

    Raises:
        InputError: if the positive rail is not above 0, or the negative one is.
    """

    positive_v: float = 12.0
    negative_v: float = -12.0

    def __post_init__(self) -> None:
        require(
            math.isfinite(self.positive_v) and self.positive_v > 0,
            f"positive rail is {self.positive_v!r} V; it must be above 0",
        )
        require(
            math.isfinite(self.negative_v) and self.negative_v <= 0,
            f"negative rail is {self.negative_v!r} V; it must be 0 or below",
        )


@dataclass(frozen=True, slots=True)
class Scale:
    """How control voltage means pitch.

    Attributes:
        volts_per_octave: more than 0.
        zero_volt_note: MIDI note at 0 V, 0 to 127.

    Raises:
        InputError: if either is out of range.
    """

    volts_per_octave: float = 1.0
    zero_volt_note: float = 36.0

    def __post_init__(self) -> None:
        require_positive(self.volts_per_octave, "volts_per_octave")
        require(
            0 <= self.zero_volt_note <= 127,
            f"zero_volt_note is {self.zero_volt_note!r}; it must be a note from 0 to 127",
        )


@dataclass(frozen=True, slots=True)
class Range:
    """One position of the range switch.

    Attributes:
        name: what the switch says there.
        connects: names of the capacitors it connects, one or more.
        series: a series resistor of its own, in place of the stage's; None shares the stage's.

    Raises:
        InputError: if the name is blank or more than one line.
    """

    name: str
    connects: tuple[str, ...]
    series: Resistor | None = None

    def __post_init__(self) -> None:
        require_name(self.name, "range name")


@dataclass(frozen=True, slots=True)
class Setting:
    """Where the controls stand.

    Attributes:
        range_index: position of the range switch, from 0.
        rotation: turn of the pot, 0 (fastest) to 1 (slowest).
        bypassed: whether a switch shorts the series resistor and the pot.

    Raises:
        InputError: if the rotation is not from 0 to 1, or the range index is negative.
    """

    range_index: int = 0
    rotation: float = 0.5
    bypassed: bool = False

    def __post_init__(self) -> None:
        # Beyond its stops a pot has no resistance to speak of; the model would extrapolate one.
        if not 0.0 <= self.rotation <= 1.0:
            raise InputError(f"rotation is {self.rotation!r}; it must be from 0 to 1")
        if self.range_index < 0:
            raise InputError(f"range index is {self.range_index!r}; it must be 0 or more")


@dataclass(frozen=True)
class GlideStage:
    """A glide stage.

    Attributes:
        title: one line.
        about: a sentence or two.
        supply: the rails.
        scale: volts per octave.
        input_buffer: the buffer before the glide.
        pull_down: from the input to ground, so that an open input rests near 0 V.
        series: the resistor that sets the fastest time.
        pot: the time pot.
        capacitors: all of them, connected or parked.
        ranges: positions of the range switch, one or more.
        bleed: across each open contact of the range switch; None leaves parked ones floating.
        output_buffer: the buffer after the glide.
        output_series: the resistor after it; None is a wire.
        load: what the next input loads it with; None is nothing.

    Raises:
        InputError: if there are no capacitors or ranges, a name is used twice, or a range
            connects nothing.
        UnknownNameError: if a range connects a capacitor that is not there.
    """

    title: str
    capacitors: tuple[Capacitor, ...]
    ranges: tuple[Range, ...]
    pot: Pot
    series: Resistor
    about: str = ""
    supply: Supply = field(default_factory=Supply)
    scale: Scale = field(default_factory=Scale)
    input_buffer: Buffer = field(default_factory=lambda: Buffer.of_class("ideal"))
    pull_down: Resistor | None = None
    bleed: Resistor | None = None
    output_buffer: Buffer = field(default_factory=lambda: Buffer.of_class("ideal"))
    output_series: Resistor | None = None
    load: Resistor | None = None

    def __post_init__(self) -> None:
        names = [capacitor.name for capacitor in self.capacitors]
        require(bool(names), "capacitor: the stage has none; it needs one or more")
        require(len(set(names)) == len(names), f"capacitor.name: {names!r} has a name twice")
        require(bool(self.ranges), "range: the stage has none; it needs one or more")
        range_names = self.range_names
        require(
            len(set(range_names)) == len(range_names),
            f"range.name: {list(range_names)!r} has a name twice",
        )
        for position in self.ranges:
            where = f"range {position.name!r} connects"
            require(bool(position.connects), f"{where} nothing; it must connect a capacitor")
            require(
                len(set(position.connects)) == len(position.connects),
                f"{where} {list(position.connects)!r}, which has a name twice",
            )
            for name in position.connects:
                if name not in names:
                    raise UnknownNameError("capacitor", name, names, where=where)
        for side, buffer in (("input", self.input_buffer), ("output", self.output_buffer)):
            low, high = self._buffer_swing(buffer)
            require(low < high, f"{side}.buffer: headroom leaves no swing between the rails")

    @property
    def range_names(self) -> tuple[str, ...]:
        """Names of the ranges in switch order."""
        return tuple(position.name for position in self.ranges)

    def range_index(self, name: str) -> int:
        """Position of a range by name.

        Raises:
            UnknownNameError: if there is no such range.
        """
        if name not in self.range_names:
            raise UnknownNameError("range", name, self.range_names)
        return self.range_names.index(name)

    @cached_property
    def wiring(self) -> Wiring:
        """Which capacitor and absorption branch hangs where."""
        connected = tuple(
            tuple(capacitor.name in position.connects for capacitor in self.capacitors)
            for position in self.ranges
        )
        return Wiring(self.capacitors, connected, self.bleed)

    # Values at a setting

    def resistance_ohms(self, setting: Setting) -> float:
        """R: series resistor plus pot; 0 when bypassed."""
        if setting.bypassed:
            return 0.0
        series = self.ranges[setting.range_index].series or self.series
        return series.resistance_ohms + self.pot.resistance_at(setting.rotation)

    def connected(self, range_index: int) -> tuple[Capacitor, ...]:
        """The capacitors that a range connects."""
        connects = self.ranges[range_index].connects
        return tuple(part for part in self.capacitors if part.name in connects)

    def capacitance_f(self, range_index: int) -> float:
        """C: sum of the capacitors that a range connects."""
        return sum(part.capacitance_f for part in self.connected(range_index))

    def time_constant_s(self, setting: Setting) -> float:
        """R C in seconds, absorption and leakage aside."""
        return self.resistance_ohms(setting) * self.capacitance_f(setting.range_index)

    def network(self, setting: Setting) -> LinearNetwork:
        """Poles and modes at a setting."""
        resistance = self.resistance_ohms(setting)
        return self.wiring.network(setting.range_index, None if setting.bypassed else resistance)

    # Volts along the way

    def _buffer_swing(self, buffer: Buffer) -> tuple[float, float]:
        low = self.supply.negative_v + buffer.headroom_negative_v
        return low, self.supply.positive_v - buffer.headroom_positive_v

    def source_volts(self, key_volts: Volts, setting: Setting) -> Volts:
        """What drives the network: key volts through the input buffer, less I_b R.

        The bias current leaves the bus through R, so as a source it is worth -I_b R.
        """
        low, high = self._buffer_swing(self.input_buffer)
        buffered = _clip(key_volts + self.input_buffer.offset_v, low, high)
        return buffered - self.output_buffer.bias_a * self.resistance_ohms(setting)

    @property
    def divider(self) -> float:
        """Share of the output that the load leaves."""
        if self.output_series is None or self.load is None:
            return 1.0
        load = self.load.resistance_ohms
        return load / (load + self.output_series.resistance_ohms)

    def output_volts(self, bus_volts: Volts) -> Volts:
        """Glide volts at the load: divider x clip(bus + V_os, swing)."""
        low, high = self._buffer_swing(self.output_buffer)
        output = _clip(bus_volts + self.output_buffer.offset_v, low, high)
        output *= self.divider  # in place, if it is an array
        return output

    def swing_volts(self) -> tuple[float, float]:
        """Lowest and highest key volts that pass both buffers, offsets included."""
        low_in, high_in = self._buffer_swing(self.input_buffer)
        low_out, high_out = self._buffer_swing(self.output_buffer)
        low = max(low_in, low_out - self.output_buffer.offset_v) - self.input_buffer.offset_v
        high = min(high_in, high_out - self.output_buffer.offset_v) - self.input_buffer.offset_v
        return low, high

    def swing_notes(self) -> tuple[float, float]:
        """Lowest and highest note, with fractions, that pass both buffers."""
        low, high = self.swing_volts()
        zero, per_octave = self.scale.zero_volt_note, self.scale.volts_per_octave
        return volts_to_note(low, zero, per_octave), volts_to_note(high, zero, per_octave)

    def note_volts(self, note: float) -> float:
        """Key volts of a note on this stage's scale."""
        return note_to_volts(note, self.scale.zero_volt_note, self.scale.volts_per_octave)

    # Closed-form answers

    def settled_state(self, key_volts: float, setting: Setting) -> Vector:
        """State in volts after resting on one key; parked capacitors are left at the same volts."""
        network = self.network(setting)
        source = self.source_volts(key_volts, setting)
        return self.wiring.parked_like_bus(
            setting.range_index, network.settled_state(source), network.gain * source
        )

    def settled_volts(self, key_volts: float, setting: Setting) -> float:
        """Glide volts after holding a key for ever."""
        return self.output_volts(self.network(setting).gain * self.source_volts(key_volts, setting))

    def response(
        self, state_v: Vector, key_volts: float, setting: Setting, times_s: Vector
    ) -> Vector:
        """Glide volts (times,) from any state with a key held from time 0 on.

        Args:
            state_v: (states,) volts, as `settled_state` or `state_after` give.
            key_volts: the key held.
            setting: where the controls stand.
            times_s: (times,) seconds, each 0 or more.
        """
        source = self.source_volts(key_volts, setting)
        return self.output_volts(self.network(setting).bus_volts_after(state_v, source, times_s))

    def state_after(
        self, state_v: Vector, key_volts: float, setting: Setting, time_s: float
    ) -> Vector:
        """State (states,) in volts after a key has been held for a time."""
        source = self.source_volts(key_volts, setting)
        return self.network(setting).state_after(state_v, source, time_s)

    def arrival_s(
        self,
        state_v: Vector,
        key_volts: float,
        setting: Setting,
        tolerance_cents: float = ARRIVAL_TOLERANCE_CENTS,
    ) -> float:
        """When the pitch comes within so many cents of where it will settle, and stays there.

        For a lone RC this is tau ln(|interval in cents| / N). Swing limits are left out.

        Args:
            state_v: (states,) volts at time 0.
            key_volts: the key held from then on.
            setting: where the controls stand.
            tolerance_cents: N, more than 0.

        Raises:
            InputError: if the tolerance is not a positive number.
        """
        require_positive(tolerance_cents, "arrival tolerance in cents")
        source = self.source_volts(key_volts, setting)
        weights, poles = self.network(setting).deviation(state_v, source)
        tolerance_v = cents_to_volts(tolerance_cents, self.scale.volts_per_octave) / self.divider
        return last_time_outside(weights, poles, tolerance_v)

    def octave_arrival_s(
        self, setting: Setting, tolerance_cents: float = ARRIVAL_TOLERANCE_CENTS
    ) -> float:
        """Arrival of a rising octave that starts settled."""
        octave = self.scale.volts_per_octave
        low, high = self.swing_volts()
        start = min(max(0.0, low), high - octave)
        state = self.settled_state(start, setting)
        return self.arrival_s(state, start + octave, setting, tolerance_cents)

    # What to be told about the parts

    def warnings(self) -> tuple[str, ...]:
        """Sentences about parts that the model does not follow or that should not be there."""
        found = []
        for capacitor in self.capacitors:
            where = f"capacitor {capacitor.name!r}: kind {capacitor.kind!r}"
            if capacitor.kind == "x7r":
                found.append(
                    f"{where} loses capacitance under bias and heat; the model does not follow that"
                )
            if capacitor.kind_data.polarised and self.supply.negative_v < 0:
                found.append(
                    f"{where} is polarised and the control voltage can go negative on this supply; "
                    "reversed it can fail: use film or a bipolar part"
                )
        return tuple(found)


def _clip(volts: Volts, low: float, high: float) -> Volts:
    """Clip volts, in place if they are an array: the caller's own, just made."""
    # A third of the time of np.clip on the short blocks of live sound.
    if isinstance(volts, np.ndarray):
        np.minimum(volts, high, out=volts)
        return np.maximum(volts, low, out=volts)
    return max(min(volts, high), low)
