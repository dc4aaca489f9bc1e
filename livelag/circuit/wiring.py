"""From parts and switch positions to the nodes of a network, and charge as the switch turns.

The state is one voltage per capacitor, in the stage's order, then one per absorption branch,
capacitor by capacitor. Connected capacitors share one node, the bus, so their voltages agree.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from livelag.circuit.network import Block, LinearNetwork, Vector, solve
from livelag.circuit.parts import Capacitor, Resistor


@dataclass(frozen=True)
class _Branch:
    """An absorption branch: its state number, its capacitor, and its two parts."""

    state: int
    capacitor: int
    capacitance_f: float
    conductance_s: float


@dataclass(frozen=True)
class _Nodes:
    """One position of the range switch: the bus with what is joined to it, and what floats."""

    with_bus: Block
    without_bus: Block
    floating: tuple[Block, ...]
    on_bus: Vector  # (states,) 1 for the capacitors on the bus


@dataclass(frozen=True)
class Wiring:
    """The capacitors and how each position of the range switch connects them.

    Attributes:
        capacitors: in the stage's order.
        connected: for each range, whether it connects each capacitor.
        bleed: across each open contact, or None.
    """

    capacitors: tuple[Capacitor, ...]
    connected: tuple[tuple[bool, ...], ...]
    bleed: Resistor | None

    @cached_property
    def _branches(self) -> tuple[_Branch, ...]:
        branches: list[_Branch] = []
        for index, capacitor in enumerate(self.capacitors):
            for row in capacitor.branches:
                capacitance = row.fraction * capacitor.capacitance_f
                state = len(self.capacitors) + len(branches)
                branches.append(_Branch(state, index, capacitance, capacitance / row.time_s))
        return tuple(branches)

    @property
    def state_count(self) -> int:
        """How many voltages the state has."""
        return len(self.capacitors) + len(self._branches)

    def network(self, range_index: int, resistance_ohms: float | None) -> LinearNetwork:
        """Poles and modes with the source behind a resistance; None ties the bus to the source."""
        nodes = self._nodes[range_index]
        if resistance_ohms is None:
            readout = np.zeros(len(nodes.without_bus.capacitances_f))
            return solve(nodes.without_bus, nodes.floating, readout, nodes.on_bus)
        driven = nodes.with_bus.driven_at_first_node(1.0 / resistance_ohms)
        readout = np.zeros(len(driven.capacitances_f))
        readout[0] = 1.0
        return solve(driven, nodes.floating, readout, np.zeros(self.state_count))

    @cached_property
    def _nodes(self) -> tuple[_Nodes, ...]:
        """What does not change with the pot, range by range."""
        found = []
        for connected in self.connected:
            on_bus = [i for i, closed in enumerate(connected) if closed]
            parked = [i for i, closed in enumerate(connected) if not closed]
            bled = parked if self.bleed is not None else []
            with_bus = self._block(on_bus, bled)
            floating = () if bled else tuple(self._block([i], []) for i in parked)
            states = np.zeros(self.state_count)
            states[on_bus] = 1.0
            found.append(_Nodes(with_bus, _bus_as_source(with_bus), floating, states))
        return tuple(found)

    def _block(self, group: list[int], bled: list[int]) -> Block:
        """Nodes of joined capacitors: the group is node 0, then bled neighbours, then branches."""
        node_of = dict.fromkeys(group, 0) | {i: 1 + k for k, i in enumerate(bled)}
        own = [b for b in self._branches if b.capacitor in node_of]
        count = 1 + len(bled) + len(own)
        G = np.zeros((count, count))
        charge = np.zeros((count, self.state_count))  # capacitance that each state brings a node
        for i, node in node_of.items():
            charge[node, i] = self.capacitors[i].capacitance_f
            G[node, node] += self.capacitors[i].leakage_siemens
        if self.bleed is not None:
            for i in bled:
                _join(G, 0, node_of[i], 1.0 / self.bleed.resistance_ohms)
        for node, branch in enumerate(own, start=1 + len(bled)):
            charge[node, branch.state] = branch.capacitance_f
            _join(G, node_of[branch.capacitor], node, branch.conductance_s)
        capacitances = charge.sum(axis=1)
        return Block(
            capacitances_f=capacitances,
            conductances_s=G,
            source_s=np.zeros(count),
            expand=(charge > 0.0).T.astype(np.float64),
            gather=charge / capacitances[:, None],
        )

    def share_charge(self, state_v: Vector, range_index: int) -> Vector:
        """State (states,) just after the switch closes: v = sum(C_i v_i) / sum(C_i) on the bus."""
        on_bus = np.flatnonzero(self.connected[range_index])
        capacitances = np.array([self.capacitors[i].capacitance_f for i in on_bus])
        shared = state_v.copy()
        shared[on_bus] = capacitances @ state_v[on_bus] / capacitances.sum()
        return shared

    def parked_like_bus(self, range_index: int, state_v: Vector, bus_v: float) -> Vector:
        """The same state with floating capacitors and their branches charged to the bus voltage."""
        if self.bleed is not None:
            return state_v
        charged = state_v.copy()
        connected = self.connected[range_index]
        for i, closed in enumerate(connected):
            if not closed:
                charged[i] = bus_v
        for branch in self._branches:
            if not connected[branch.capacitor]:
                charged[branch.state] = bus_v
        return charged

    def jump(self, state_v: Vector, range_index: int, bus_v: float) -> Vector:
        """State (states,) just after the bus is forced to a voltage; the rest keeps its charge."""
        jumped = state_v.copy()
        jumped[np.flatnonzero(self.connected[range_index])] = bus_v
        return jumped


def _join(G: Vector, a: int, b: int, siemens: float) -> None:
    G[a, a] += siemens
    G[b, b] += siemens
    G[a, b] -= siemens
    G[b, a] -= siemens


def _bus_as_source(block: Block) -> Block:
    """The block when the bus is the source itself: its node goes, its neighbours are driven."""
    return Block(
        capacitances_f=block.capacitances_f[1:],
        conductances_s=block.conductances_s[1:, 1:],
        source_s=-block.conductances_s[1:, 0],
        expand=block.expand[:, 1:],
        gather=block.gather[1:],
    )
