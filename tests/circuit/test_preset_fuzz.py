"""Presets mangled at random: nothing but the errors that a user can meet."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from preset_texts import EVERY_PATH, FULL, changed

from livelag.circuit.presets import (
    parse_stage,
    presets_folder,
    stage_to_toml,
)
from livelag.circuit.stage import Setting
from livelag.errors import LivelagError

# Fuzz


SHIPPED_TEXTS = [p.read_text(encoding="utf-8") for p in sorted(presets_folder().glob("*.toml"))]


def survives(text):
    try:
        stage = parse_stage(text, "my.toml")
    except LivelagError as error:
        message = str(error)
        assert message.startswith("my.toml: ")
        assert "\n" not in message
        return
    for index in range(len(stage.ranges)):
        network = stage.network(Setting(index, 1.0))
        assert np.all(np.isfinite(network.poles))
        assert 0.0 < network.gain <= 1.0 + 1e-9
    assert parse_stage(stage_to_toml(stage), "again.toml") == stage


@st.composite
def mangled_texts(draw):
    text = draw(st.sampled_from([*SHIPPED_TEXTS, FULL]))
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(text)))
        length = draw(st.integers(0, 6))
        insert = draw(st.text(max_size=4) | st.sampled_from(list('"[]{}=#,.-0\n')))
        text = text[:start] + insert + text[start + length :]
    return text


scalars = st.one_of(
    st.booleans(),
    st.integers(-(2**70), 2**70),
    st.floats(),
    st.text(max_size=5),
    st.sampled_from(["1k", "-4k7", "0", "1e300", "1e-300", "4u7", "linear", "ideal", "small"]),
    st.dates(),
    st.times(),
)
values = st.recursive(
    scalars,
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=4), inner, max_size=3)
    ),
    max_leaves=4,
)


@settings(deadline=None, max_examples=200)
@given(mangled_texts())
def test_mangled_texts_raise_nothing_but_what_a_user_can_meet(text):
    survives(text)


@settings(deadline=None, max_examples=200)
@given(st.sampled_from(EVERY_PATH), values)
def test_any_value_at_any_key_raises_nothing_but_what_a_user_can_meet(path, value):
    survives(changed(path, value))
