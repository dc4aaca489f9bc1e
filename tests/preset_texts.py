"""A preset with every key there is, and ways to spoil it."""

import tomllib

import pytest
import tomli_w

from livelag.circuit.presets import parse_stage
from livelag.errors import LivelagError

# Every key there is, each once.
FULL = """
title = "everything"
about = "every key"
[supply]
positive = "12 V"
negative = -12
[scale]
volts_per_octave = 1.0
zero_volt_note = 36
[input]
pull_down = "1M"
[input.buffer]
offset = "3m"
bias = "65p"
offset_limit = "6m"
bias_limit = "200p"
[input.buffer.headroom]
positive = "1.5"
negative = 4
[time.series]
value = "1k"
tolerance = 0.01
[time.pot]
value = "470k"
tolerance = 0.2
end = "2"
[time.pot.taper]
rotation = [0.0, 0.5, 1.0]
fraction = [0.0, 0.4, 1.0]
[[capacitor]]
name = "small"
value = "330n"
kind = "polyester"
tolerance = 0.1
insulation = "30G"
[[capacitor.absorption]]
fraction = 0.002
time = "1 s"
[[capacitor]]
name = "large"
value = "4u7"
kind = "x7r"
[[range]]
name = "fast"
connects = ["small"]
series = "2k2"
[[range]]
name = "slow"
connects = ["small", "large"]
[switch]
bleed = {value = "10M", tolerance = 0.05}
[output]
buffer = "jfet-input"
series = "1k"
load = "100k"
"""


def paths(content, prefix=()):
    """Every key of nested tables as a tuple of names and list positions."""
    items = content.items() if isinstance(content, dict) else enumerate(content)
    for key, value in items:
        yield (*prefix, key)
        if isinstance(value, dict) or (
            isinstance(value, list) and value and isinstance(value[0], dict)
        ):
            yield from paths(value, (*prefix, key))


def dotted(path):
    """A path as messages write it: tables by name, places in lists from 1."""
    return "".join(f"[{k + 1}]" if isinstance(k, int) else f".{k}" for k in path).lstrip(".")


def changed(path, value, text=FULL):
    """The text of a preset with one value replaced, or the key left out if it is None."""
    content = tomllib.loads(text)
    place = content
    for key in path[:-1]:
        place = place[key]
    if value is None:
        del place[path[-1]]
    else:
        place[path[-1]] = value
    return tomli_w.dumps(content)


def refusal(text):
    """The one line that a text is refused with."""
    with pytest.raises(LivelagError) as caught:
        parse_stage(text, "my.toml")
    message = str(caught.value)
    assert "\n" not in message
    assert message.startswith("my.toml: ")
    return message


EVERY_PATH = list(paths(tomllib.loads(FULL)))
KEYS = [path for path in EVERY_PATH if isinstance(path[-1], str)]
