"""The stage's linear network in closed form: poles, modes, responses that are sums of decays.

With node voltages x, capacitances C (diagonal), conductances G (symmetric) and one source u
behind a conductance b, the network is

    C dx/dt = -G x + b u                                                            (1)

C and G are symmetric and positive, so with K = C^(-1/2) G C^(-1/2) = Q L Q' the poles are the
real numbers s = -L and, in modal coordinates z = Q' C^(1/2) x,

    dz/dt = s z + g u,   g = Q' C^(-1/2) b,   x = C^(-1/2) Q z                       (2)

Held at u, every mode is a decay toward z_inf = -g u / s:  z(t) = z_inf + (z(0) - z_inf) e^(st) (3)

Source: state-space analysis of RC networks, as in any textbook of linear systems.

| symbol  | name here        | meaning                                          | unit       |
|---------|------------------|--------------------------------------------------|------------|
| s       | ``poles``        | poles, zero or negative                          | 1/s        |
| g       | ``drive``        | how the source drives each mode                  | sqrt(F)/s  |
| c       | ``readout``      | bus voltage = sum of c z + ``feedthrough`` u     | 1/sqrt(F)  |
| x       | state            | V across every capacitor and absorption branch   | V          |
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]

_RELATIVE_ROUNDING = float(np.finfo(np.float64).eps)


@dataclass(frozen=True)
class LinearNetwork:
    """One setting of the stage as decoupled modes.

    The first ``driven_count`` modes reach the bus, the node that the output buffer reads; the
    rest belong to parked capacitors that nothing connects to it and only leak.

    Attributes:
        poles: (modes,) poles in 1/s, each 0 or less.
        drive: (modes,) how the source drives each mode.
        readout: (modes,) weight of each mode in the bus voltage.
        feedthrough: weight of the source itself in the bus voltage: 1 when the glide is bypassed.
        to_modes: (modes, states) from volts to modal coordinates.
        to_volts: (states, modes) from modal coordinates to volts.
        source_to_volts: (states,) volts that follow the source at once when bypassed.
        driven_count: how many modes the source drives and the bus shows.
    """

    poles: Vector
    drive: Vector
    readout: Vector
    feedthrough: float
    to_modes: Matrix
    to_volts: Matrix
    source_to_volts: Vector
    driven_count: int

    @property
    def gain(self) -> float:
        """Settled bus voltage per volt of source."""
        n = self.driven_count
        return float(self.feedthrough - self.readout[:n] @ (self.drive[:n] / self.poles[:n]))

    def settled_modes(self, source_v: float) -> Vector:
        """Modal coordinates (modes,) after the source has been held for ever; undriven ones 0."""
        z = np.zeros_like(self.poles)
        n = self.driven_count
        z[:n] = -self.drive[:n] * source_v / self.poles[:n]
        return z

    def modes_after(self, state_v: Vector, source_v: float, times_s: Vector) -> Matrix:
        """Modal coordinates (times, modes) from a state in volts with the source held, eq. 3."""
        settled = self.settled_modes(source_v)
        start = self.to_modes @ state_v - settled
        modes: Matrix = settled + start * np.exp(np.multiply.outer(times_s, self.poles))
        return modes

    def bus_volts_after(self, state_v: Vector, source_v: float, times_s: Vector) -> Vector:
        """Bus voltage (times,) from a state in volts with the source held."""
        modes = self.modes_after(state_v, source_v, times_s)
        bus: Vector = modes @ self.readout + self.feedthrough * source_v
        return bus

    def state_after(self, state_v: Vector, source_v: float, time_s: float) -> Vector:
        """State (states,) in volts after the source has been held for a time."""
        modes = self.modes_after(state_v, source_v, np.array([time_s]))[0]
        state: Vector = self.to_volts @ modes + self.source_to_volts * source_v
        return state

    def settled_state(self, source_v: float) -> Vector:
        """State (states,) in volts after the source has been held for ever; parked ones at 0."""
        return self.to_volts @ self.settled_modes(source_v) + self.source_to_volts * source_v

    def deviation(self, state_v: Vector, source_v: float) -> tuple[Vector, Vector]:
        """Weights and poles of the decays whose sum is bus voltage minus settled bus voltage."""
        n = self.driven_count
        start = (self.to_modes @ state_v - self.settled_modes(source_v))[:n]
        return self.readout[:n] * start, self.poles[:n]


@dataclass(frozen=True)
class Block:
    """Nodes joined by resistors: the piece of a network that is solved at once.

    Attributes:
        capacitances_f: (nodes,) capacitance of each node to ground, more than 0.
        conductances_s: (nodes, nodes) symmetric conductance matrix in siemens.
        source_s: (nodes,) conductance from the source to each node in siemens.
        expand: (states, nodes) which node each state's voltage is read from.
        gather: (nodes, states) share of each state's charge in its node's voltage.
    """

    capacitances_f: Vector
    conductances_s: Matrix
    source_s: Vector
    expand: Matrix
    gather: Matrix

    def driven_at_first_node(self, source_s: float) -> Block:
        """The same nodes with the source joined to the first one."""
        conductances = self.conductances_s.copy()
        conductances[0, 0] += source_s
        source = np.zeros_like(self.source_s)
        source[0] = source_s
        return replace(self, conductances_s=conductances, source_s=source)


def solve(
    driven: Block, silent: tuple[Block, ...], bus_readout: Vector, source_to_volts: Vector
) -> LinearNetwork:
    """Turn blocks of nodes into one `LinearNetwork`.

    Args:
        driven: the block that the source drives and the bus belongs to.
        silent: blocks that nothing joins to it and that only leak.
        bus_readout: (nodes of the driven block,) 1 at the bus, or all 0 when it is bypassed.
        source_to_volts: (states,) 1 at states tied to the source, all 0 unless bypassed.
    """
    pieces = [_solve_block(driven, _RELATIVE_ROUNDING), *(_solve_block(b, 0.0) for b in silent)]
    poles, drive, to_modes, to_volts, node_volts = zip(*pieces, strict=True)
    readout = np.zeros(sum(len(p) for p in poles))
    readout[: len(poles[0])] = bus_readout @ node_volts[0]
    return LinearNetwork(
        poles=np.concatenate(poles),
        drive=np.concatenate(drive),
        readout=readout,
        feedthrough=float(source_to_volts.max()),
        to_modes=np.concatenate(to_modes),
        to_volts=np.concatenate(to_volts, axis=1),
        source_to_volts=source_to_volts,
        driven_count=len(poles[0]),
    )


def _solve_block(block: Block, smallest: float) -> tuple[Vector, Vector, Matrix, Matrix, Matrix]:
    """Poles, drive, to_modes, to_volts and node voltages per mode of one block, eq. 2.

    ``smallest`` is the least size of a pole relative to the largest: 0 where a leak-free part may
    keep its charge for ever, more where the source reaches every node and no pole can be 0.
    """
    root = np.sqrt(block.capacitances_f)
    eigenvalues, Q = np.linalg.eigh(block.conductances_s / (root[:, None] * root))
    node_volts = Q / root[:, None]
    # Rounding must make neither a leak-free part grow nor a driven one stand still.
    poles = -np.maximum(eigenvalues, smallest * eigenvalues.max(initial=0.0))
    to_modes = (Q.T * root) @ block.gather
    return poles, node_volts.T @ block.source_s, to_modes, block.expand @ node_volts, node_volts
