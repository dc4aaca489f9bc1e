"""Hypothesis strategies for legal stages: whatever can be soldered and a preset can say."""

from hypothesis import strategies as st

from livelag.circuit.kinds import BUFFER_CLASSES, CAPACITOR_KINDS, Absorption
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor, Taper
from livelag.circuit.stage import GlideStage, Range, Scale, Setting, Supply


def decades(low, high):
    """A float with an even chance of every decade from 10**low to 10**high."""
    return st.floats(low, high).map(lambda exponent: 10.0**exponent)


tolerances = st.floats(0.0, 0.9)
names = st.text(
    st.characters(exclude_categories=("C", "Z")), min_size=1, max_size=8
)  # visible letters of any script


def resistors(low=1.0, high=6.0):
    return st.builds(Resistor, decades(low, high), tolerances)


@st.composite
def measured_tapers(draw):
    inner = sorted(draw(st.sets(st.integers(1, 99), max_size=5)))
    rises = sorted(draw(st.lists(st.integers(0, 100), min_size=len(inner), max_size=len(inner))))
    return Taper.measured(
        (0.0, *(n / 100 for n in inner), 1.0), (0.0, *(n / 100 for n in rises), 1.0)
    )


def tapers():
    middles = st.floats(0.01, 0.49)
    return st.one_of(
        st.just(Taper.linear()),
        st.builds(Taper.logarithmic, middles),
        st.builds(Taper.reverse_logarithmic, middles),
        measured_tapers(),
    )


@st.composite
def pots(draw):
    value = draw(decades(3, 6.5))
    end = draw(st.one_of(st.just(0.0), st.floats(0.1, 0.1 * value)))
    return Pot(value, draw(tapers()), draw(tolerances), end)


absorptions = st.builds(Absorption, decades(-4, -0.7), decades(-2, 1.5))


def capacitors(name):
    return st.builds(
        Capacitor,
        name=st.just(name),
        capacitance_f=decades(-9, -4),
        kind=st.sampled_from(sorted(CAPACITOR_KINDS)),
        tolerance=tolerances,
        insulation_ohms=st.none() | decades(6, 14),
        absorption=st.none() | st.lists(absorptions, max_size=2).map(tuple),
    )


def buffers():
    custom = st.builds(
        Buffer,
        name=st.just("custom"),
        offset_v=st.floats(-0.02, 0.02),
        bias_a=st.floats(-1e-6, 1e-6),
        headroom_positive_v=st.floats(0.0, 2.0),
        headroom_negative_v=st.floats(0.0, 2.0),
        offset_limit_v=st.floats(0.02, 0.05),
        bias_limit_a=st.floats(1e-6, 1e-5),
    )
    return st.sampled_from(sorted(BUFFER_CLASSES)).map(Buffer.of_class) | custom


supplies = st.sampled_from(
    [Supply(12.0, -12.0), Supply(15.0, -15.0), Supply(9.0, 0.0), Supply(12.0, -5.0)]
)


@st.composite
def stages(draw):
    """Any legal `GlideStage`: one to three capacitors and ranges, with or without each option."""
    capacitor_names = draw(st.lists(names, min_size=1, max_size=3, unique=True))
    range_names = draw(st.lists(names, min_size=1, max_size=3, unique=True))
    connects = st.lists(
        st.sampled_from(capacitor_names), min_size=1, max_size=len(capacitor_names), unique=True
    ).map(tuple)
    return GlideStage(
        title=draw(names),
        about=draw(st.text(st.characters(exclude_categories=("C",)), max_size=20)),
        capacitors=tuple(draw(capacitors(name)) for name in capacitor_names),
        ranges=tuple(
            Range(name, draw(connects), draw(st.none() | resistors())) for name in range_names
        ),
        pot=draw(pots()),
        series=draw(resistors()),
        supply=draw(supplies),
        scale=Scale(draw(st.sampled_from([1.0, 1.2, 0.5])), draw(st.integers(0, 127))),
        input_buffer=draw(buffers()),
        pull_down=draw(st.none() | resistors(4, 7)),
        bleed=draw(st.none() | resistors(4, 8)),
        output_buffer=draw(buffers()),
        output_series=draw(st.none() | resistors(1, 4)),
        load=draw(st.none() | resistors(4, 6)),
    )


@st.composite
def settings_of(draw, stage, *, bypass=False):
    """Any `Setting` of a stage; bypassed ones too if asked for."""
    return Setting(
        draw(st.integers(0, len(stage.ranges) - 1)),
        draw(st.floats(0.0, 1.0)),
        draw(st.booleans()) if bypass else False,
    )


@st.composite
def stages_with_settings(draw, *, bypass=False):
    """A legal stage and one of its settings."""
    stage = draw(stages())
    return stage, draw(settings_of(stage, bypass=bypass))


def key_volts(stage):
    """Key volts within the swing of both buffers and what bias may add."""
    low, high = stage.swing_volts()
    margin = 0.1 * (high - low)
    return st.floats(low + margin, high - margin)


def states(stage):
    """Any state of a stage, in volts, as lists of one voltage per capacitor and branch."""
    count = stage.wiring.state_count
    return st.lists(st.floats(-10.0, 10.0), min_size=count, max_size=count)
