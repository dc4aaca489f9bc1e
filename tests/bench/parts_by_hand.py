"""Every choice of a small drawer tried in plain Python, with no code of the search.

All formulas are written out again: times from R C, the score from its definition.
"""

from itertools import product
from math import log

# Of the classes and kinds as they are typically specified; see circuit/kinds.py for sources.
INSULATION_S = {"polypropylene": 1e5, "polyester": 1e4, "bipolar electrolytic": 330.0}


def try_everything(resistors, pots, capacitors, targets, surroundings, within):
    """Every legal choice as (score, connection, ohms, pot, farads), the best first.

    Args:
        resistors: (ohms, quantity) each.
        pots: ohms.
        capacitors: (farads, kind, quantity) each.
        targets: (shortest, longest) of each range, seconds.
        surroundings: volts per octave, divider, bias limit, leap in volts.
        within: fraction that each time may be off.
    """
    count = len(targets)
    connections = ["single"] if count == 1 else ["added", "exchanged", "series-switched"]
    found = []
    for connection in connections:
        switched = connection == "series-switched"
        for rows in product(range(len(resistors)), repeat=count if switched else 1):
            if switched and len(set(rows)) == 1:
                continue
            if any(rows.count(row) > resistors[row][1] for row in rows):
                continue
            for pot in pots:
                for lots in product(range(len(capacitors)), repeat=count):
                    if any(lots.count(lot) > capacitors[lot][2] for lot in lots):
                        continue
                    ohms = [resistors[row][0] for row in rows]
                    chosen = [capacitors[lot] for lot in lots]
                    score, error = judge(connection, ohms, pot, chosen, targets, surroundings)
                    if error <= log(1.0 + within):
                        farads = [lot[0] for lot in chosen]
                        found.append((score, connection, tuple(ohms), pot, tuple(farads)))
    return sorted(found)


def judge(connection, ohms, pot, chosen, targets, surroundings):
    """Score and worst logarithmic error of one choice."""
    per_octave, divider, bias, leap = surroundings
    each = ohms if len(ohms) == len(targets) else ohms * len(targets)
    errors = []
    for number, (shortest, longest) in enumerate(targets):
        farads = chosen[number][0]
        if connection == "added":
            farads = sum(lot[0] for lot in chosen[: number + 1])
        errors.append(log(each[number] * farads / shortest))
        errors.append(log((each[number] + pot) * farads / longest))
    rms = (sum(error * error for error in errors) / len(errors)) ** 0.5
    slowest = chosen if connection == "added" else [chosen[-1]]
    drop = (each[-1] + pot) * sum(farads / INSULATION_S[kind] for farads, kind, _ in slowest)
    tuning = divider * (1200.0 * drop + 1200.0 * bias * (each[-1] + pot) / per_octave) / (1 + drop)
    extra_parts = len(ohms) + 1 + len(chosen) - (len(targets) + 2)
    current = leap / min(each)
    score = rms / log(1.05) + tuning + extra_parts + max(0.0, current / 0.005 - 1.0)
    return score, max(abs(error) for error in errors)
