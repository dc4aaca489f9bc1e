"""Parts that can be had: what the trade stocks, as lots of equal parts.

Typical figures, all common practice, no source; a drawer file (`livelag.bench.drawer`) says
what is really there.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Generic, TypeVar

from livelag.bench.preferred import preferred_values
from livelag.circuit.kinds import CAPACITOR_KINDS
from livelag.circuit.parts import Capacitor, Pot, Resistor, Taper
from livelag.errors import InputError, UnknownNameError

Part = TypeVar("Part", Resistor, Pot, Capacitor)

UNLIMITED = math.inf
# Less than 100 ohms would leave the buffer to drive the capacitor nearly bare.
SERIES_OHMS = (100.0, 1e6)
CAPACITANCE_F = (10e-12, 1e-3)
RESISTOR_SERIES = ("E12", "E24", "E96")
CAPACITOR_SERIES = ("E3", "E6", "E12")
# Two families are on the shelves: 1-2-5 with 25 k and its like, and 1-2.2-4.7.
POT_OHMS = (
    1e3, 2e3, 2.2e3, 4.7e3, 5e3,
    10e3, 20e3, 22e3, 25e3, 47e3, 50e3,
    100e3, 200e3, 220e3, 250e3, 470e3, 500e3,
    1e6, 2e6, 2.2e6,
)  # fmt: skip
TAPERS: dict[str, Taper] = {
    taper.name: taper
    for taper in (Taper.linear(), Taper.logarithmic(), Taper.reverse_logarithmic())
}
# Smallest and largest of each kind that a shop keeps and a small board holds; the kinds exist
# beyond it.
STOCKED_F: dict[str, tuple[float, float]] = {
    "c0g": (10e-12, 10e-9),
    "polypropylene": (100e-12, 1e-6),
    "polyester": (1e-9, 10e-6),
    "x7r": (1e-9, 10e-6),
    "bipolar electrolytic": (1e-6, 470e-6),
    "electrolytic": (1e-6, 1e-3),
    "tantalum": (100e-9, 100e-6),
}


@dataclass(frozen=True, slots=True)
class Lot(Generic[Part]):
    """Equal parts.

    Attributes:
        part: one of them.
        quantity: how many there are, 1 or more; `UNLIMITED` in a shop.
    """

    part: Part
    quantity: float = UNLIMITED


@dataclass(frozen=True, slots=True)
class Pool:
    """What a stage may be built of.

    Attributes:
        resistors: for the series resistor.
        pots: for the time pot.
        capacitors: for the ranges; their names mean nothing here.
        tapers: the tapers that every pot can be had with; empty if each has its own.
        left_out: polarised lots that were left out because the control voltage can reverse.
        where: the file it comes from; empty for the trade's stock.
    """

    resistors: tuple[Lot[Resistor], ...]
    pots: tuple[Lot[Pot], ...]
    capacitors: tuple[Lot[Capacitor], ...]
    tapers: tuple[Taper, ...] = field(default=())
    left_out: int = 0
    where: str = ""


def check_kinds(kinds: Sequence[str], can_reverse: bool, where: str = "--kinds") -> None:
    """Refuse kinds of capacitor that cannot be asked for.

    Args:
        kinds: names.
        can_reverse: whether the control voltage can reverse.
        where: the option or field, for the message.

    Raises:
        UnknownNameError: if one is not a kind that is stocked.
        InputError: if one is polarised although the control voltage can reverse.
    """
    for kind in kinds:
        if kind not in STOCKED_F:
            raise UnknownNameError("capacitor kind", kind, STOCKED_F, where=where)
        if can_reverse and CAPACITOR_KINDS[kind].polarised:
            raise InputError(
                f"{where}: {kind!r} is polarised and the control voltage can go negative on this "
                "supply; reversed it can fail: ask for film or 'bipolar electrolytic'"
            )


def shop(
    resistor_series: str = "E24",
    capacitor_series: str = "E6",
    kinds: Sequence[str] | None = None,
    taper: str | None = None,
    *,
    can_reverse: bool = True,
) -> Pool:
    """Everything the trade stocks in some series.

    Of the kinds that make a value the one that leaks least is taken (of equals the closer
    tolerance): no other could make a better stage, since leakage is all that tells kinds apart
    when stages are ranked.

    Args:
        resistor_series: one of `RESISTOR_SERIES`.
        capacitor_series: one of `CAPACITOR_SERIES`.
        kinds: kinds of capacitor allowed; None allows all that suit the supply.
        taper: the pots' taper, one of `TAPERS`; None leaves it open.
        can_reverse: whether the control voltage can reverse, which rules out polarised kinds.

    Raises:
        UnknownNameError: if a series, kind or taper does not exist.
        InputError: if a kind asked for is polarised although the voltage can reverse.
    """
    if resistor_series not in RESISTOR_SERIES:
        raise UnknownNameError("resistor series", resistor_series, RESISTOR_SERIES)
    if capacitor_series not in CAPACITOR_SERIES:
        raise UnknownNameError("capacitor series", capacitor_series, CAPACITOR_SERIES)
    tapers = tapers_named(taper)
    if kinds is None:
        kinds = [k for k in STOCKED_F if not (can_reverse and CAPACITOR_KINDS[k].polarised)]
    check_kinds(kinds, can_reverse)
    return Pool(
        tuple(Lot(Resistor(ohms)) for ohms in preferred_values(resistor_series, *SERIES_OHMS)),
        tuple(Lot(Pot(ohms, tapers[0])) for ohms in POT_OHMS),
        tuple(
            Lot(Capacitor("stock", farads, kind, CAPACITOR_KINDS[kind].tolerance))
            for farads in preferred_values(capacitor_series, *CAPACITANCE_F)
            if (kind := _least_leaky(farads, kinds))
        ),
        tapers,
    )


def tapers_named(taper: str | None) -> tuple[Taper, ...]:
    """The taper of a name, or all that are stocked for None.

    Raises:
        UnknownNameError: if there is no such taper.
    """
    if taper is None:
        return tuple(TAPERS.values())
    if taper not in TAPERS:
        raise UnknownNameError("taper", taper, TAPERS)
    return (TAPERS[taper],)


def _least_leaky(farads: float, kinds: Sequence[str]) -> str | None:
    made = [kind for kind in kinds if STOCKED_F[kind][0] <= farads <= STOCKED_F[kind][1]]

    def rank(kind: str) -> tuple[float, float]:
        data = CAPACITOR_KINDS[kind]
        return data.leakage_siemens(farads), data.tolerance

    return min(made, key=rank, default=None)
