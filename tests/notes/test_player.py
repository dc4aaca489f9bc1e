from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from mido import Message

from livelag.errors import InputError, UnknownNameError
from livelag.notes.player import CONTROLLERS, Moment, Player, PlayerSettings
from livelag.notes.settings import Controller


def on(note: int, velocity: int = 100) -> Message:
    return Message("note_on", note=note, velocity=velocity)


def off(note: int) -> Message:
    return Message("note_off", note=note)


def cc(control: int, value: int) -> Message:
    return Message("control_change", control=control, value=value)


def play(player: Player, *messages: Message) -> Moment:
    """Handle messages and return the moment that the last of them made."""
    for message in messages[:-1]:
        player.handle(message)
    moment = player.handle(messages[-1])
    assert moment is not None
    return moment


class TestKeys:
    def test_a_key_becomes_volts_and_a_gate(self):
        moment = play(Player(), on(60, 77))
        assert moment == Moment(2.0, True, 77, False, 60)

    def test_volts_follow_the_scale(self):
        player = Player(PlayerSettings(volts_per_octave=1.2, zero_volt_note=60.0))
        assert play(player, on(48)).key_volts == pytest.approx(-1.2)

    def test_volts_stay_after_release(self):
        moment = play(Player(), on(72), off(72))
        assert (moment.key_volts, moment.gate, moment.note) == (3.0, False, None)

    @pytest.mark.parametrize(("priority", "sounding"), [("last", 60), ("low", 48), ("high", 72)])
    def test_priority_picks_among_held_keys(self, priority, sounding):
        player = Player(PlayerSettings(priority=priority))
        for note in (48, 72, 60):
            player.handle(on(note))
        assert player.now.note == sounding

    def test_a_key_that_loses_changes_nothing(self):
        player = Player(PlayerSettings(priority="low"))
        player.handle(on(48))
        assert player.handle(on(60)) is None

    def test_release_falls_back_to_a_held_key_with_its_velocity(self):
        moment = play(Player(), on(48, 20), on(60, 90), off(60))
        assert (moment.note, moment.velocity, moment.gate) == (48, 20, True)
        assert not moment.retrigger

    def test_release_of_a_silent_key_changes_nothing(self):
        player = Player()
        play(player, on(48), on(60))
        assert player.handle(off(48)) is None
        assert player.handle(off(48)) is None

    def test_a_key_struck_twice_is_released_once(self):
        player = Player()
        play(player, on(48), on(60), on(48))
        assert player.keys_down == (60, 48)
        assert play(player, off(48)).note == 60

    @pytest.mark.parametrize("retrigger", [False, True])
    def test_retrigger_restarts_the_level_on_a_new_key_only(self, retrigger):
        player = Player(PlayerSettings(retrigger=retrigger))
        player.handle(on(48))
        assert play(player, on(60)).retrigger is retrigger
        assert play(player, off(60)).retrigger is False

    def test_reset_forgets_everything(self):
        player = Player()
        fresh = player.now
        play(player, cc(101, 0), cc(100, 0), cc(6, 12), cc(64, 127), on(60), on(64))
        play(player, cc(65, 0), Message("pitchwheel", pitch=4096))
        player.reset()
        assert (player.now, player.keys_down, player.portamento) == (fresh, (), True)
        assert player.bend_range_semitones == 2.0


class TestHoldPedal:
    def test_it_keeps_the_gate_until_it_goes_up(self):
        player = Player()
        play(player, cc(64, 127), on(60))
        assert player.handle(off(60)) is None
        assert player.now.gate
        moment = play(player, cc(64, 0))
        assert (moment.gate, moment.key_volts) == (False, 2.0)

    def test_keys_that_are_down_come_first(self):
        player = Player(PlayerSettings(priority="low"))
        play(player, cc(64, 127), on(48))
        player.handle(off(48))
        assert play(player, on(60)).note == 60
        assert player.handle(cc(64, 0)) is None

    def test_a_trill_works_over_a_held_key(self):
        player = Player()
        assert play(player, cc(64, 127), on(60), on(62), off(62)).note == 60

    def test_it_brings_no_released_key_back(self):
        player = Player()
        play(player, on(60), off(60))
        assert player.handle(cc(64, 127)) is None

    def test_a_key_played_out_of_a_held_one_is_legato(self):
        player = Player(PlayerSettings(glide="legato only"))
        play(player, cc(64, 127), on(48))
        player.handle(off(48))
        assert not play(player, on(60)).bypassed


class TestGlide:
    def test_legato_only_bypasses_a_detached_note(self):
        player = Player(PlayerSettings(glide="legato only"))
        assert play(player, on(48)).bypassed
        assert not play(player, on(60)).bypassed
        assert not play(player, off(60)).bypassed
        assert play(player, off(48), on(50)).bypassed

    def test_the_switch_bypasses_at_once(self):
        player = Player()
        player.handle(on(48))
        assert play(player, cc(65, 0)).bypassed
        assert not play(player, cc(65, 127)).bypassed

    def test_portamento_control_glides_one_note_with_the_switch_off(self):
        player = Player()
        play(player, cc(65, 0), on(60))
        assert player.handle(cc(84, 48)) is None
        moment = play(player, on(72))
        assert (moment.jump_volts, moment.bypassed, moment.key_volts) == (1.0, False, 3.0)
        moment = play(player, on(74))
        assert (moment.jump_volts, moment.bypassed) == (None, True)

    def test_portamento_control_does_not_reach_the_key_fallen_back_to(self):
        assert play(Player(), cc(65, 0), on(48), cc(84, 36), on(60), off(60)).bypassed

    def test_the_source_key_is_bent_like_the_note(self):
        moment = play(Player(), Message("pitchwheel", pitch=-8192), cc(84, 48), on(60))
        assert moment.jump_volts == pytest.approx(1.0 - 2 / 12)
        assert moment.key_volts == pytest.approx(2.0 - 2 / 12)

    def test_the_source_key_serves_the_next_note_even_if_that_is_silent(self):
        player = Player(PlayerSettings(priority="low"))
        play(player, on(48), cc(84, 36), on(60), off(48))
        assert play(player, on(40)).jump_volts is None


class TestPotAndRange:
    def test_another_controller_turns_the_pot(self):
        player = Player(PlayerSettings(pot_controller=74))
        assert play(player, cc(74, 127)).rotation == 1.0
        assert play(player, cc(74, 32)).rotation == pytest.approx(32 / 127)
        assert player.handle(cc(5, 64)) is None
        assert player.handle(cc(37, 64)) is None

    def test_a_low_controller_has_its_fine_half(self):
        player = Player(PlayerSettings(pot_controller=12))
        assert play(player, cc(12, 1), cc(44, 64)).rotation == pytest.approx(192 / 16256)

    def test_a_fine_value_alone_does_not_move_the_pot(self):
        assert Player().handle(cc(37, 100)) is None

    def test_the_range_controller_is_passed_on_raw(self):
        assert play(Player(), cc(80, 100)).range_value == 100
        assert play(Player(PlayerSettings(range_controller=81)), cc(81, 3)).range_value == 3

    def test_one_shots_last_one_moment(self):
        moment = play(Player(), cc(5, 20), cc(80, 9), on(60))
        assert (moment.rotation, moment.range_value) == (None, None)


class TestOtherMessages:
    @pytest.mark.parametrize(
        "message",
        [
            Message("sysex", data=(1, 2)),
            Message("clock"),
            Message("active_sensing"),
            Message("start"),
            Message("songpos", pos=3),
            Message("program_change", program=3),
            Message("aftertouch", value=3),
            Message("polytouch", note=60, value=3),
            cc(1, 64),
            cc(122, 0),
            cc(66, 127),
        ],
    )
    def test_they_change_nothing(self, message):
        player = Player()
        player.handle(on(60))
        assert player.handle(message) is None

    def test_nothing_is_said_when_nothing_changes(self):
        player = Player()
        assert player.handle(Message("pitchwheel", pitch=0)) is None
        assert player.handle(cc(65, 127)) is None
        assert player.handle(cc(123, 0)) is None


class TestSettings:
    def test_every_controller_has_its_row(self):
        assert set(CONTROLLERS) == set(Controller)

    @pytest.mark.parametrize(
        ("bad", "said"),
        [
            ({"priority": "lats"}, "did you mean 'last'"),
            ({"glide": "never"}, "known: always, legato only"),
        ],
    )
    def test_unknown_names_say_which_exist(self, bad, said):
        with pytest.raises(UnknownNameError, match=said):
            PlayerSettings(**bad)

    @pytest.mark.parametrize(
        ("bad", "said"),
        [
            ({"volts_per_octave": 0.0}, "volts_per_octave is 0.0; it must be more than 0"),
            ({"volts_per_octave": float("nan")}, "more than 0"),
            ({"zero_volt_note": 128.0}, "zero_volt_note is 128.0; it must be 0 to 127"),
            ({"pot_controller": 128}, "pot_controller is 128; it must be a controller"),
            ({"pot_controller": True}, "it must be a controller"),
            ({"pot_controller": 64}, "which means hold pedal"),
            ({"pot_controller": 80}, "range_controller is 80, which means pot_controller"),
            ({"range_controller": 37}, "which means the fine half of pot_controller 5"),
            ({"range_controller": 123}, "which means all notes off"),
        ],
    )
    def test_bad_values_are_refused(self, bad, said):
        with pytest.raises(InputError, match=said):
            PlayerSettings(**bad)


notes = st.integers(36, 48)
keys = st.one_of(
    st.builds(on, notes, st.integers(0, 127)),
    st.builds(off, notes),
    st.builds(cc, st.just(64), st.sampled_from([0, 127])),
)
anything = st.one_of(
    keys,
    st.builds(cc, st.integers(0, 127), st.integers(0, 127)),
    st.builds(lambda pitch: Message("pitchwheel", pitch=pitch), st.integers(-8192, 8191)),
)
set_up = st.builds(
    PlayerSettings,
    priority=st.sampled_from(["last", "low", "high"]),
    glide=st.sampled_from(["always", "legato only"]),
    retrigger=st.booleans(),
)


@given(set_up, st.lists(keys, max_size=60))
def test_the_sounding_key_is_the_one_with_priority(settings, messages):
    player = Player(settings)
    down: list[int] = []
    pedal = False
    sounding = None
    for message in messages:
        player.handle(message)
        if message.type == "control_change":
            pedal = message.value >= 64
        else:
            if message.note in down and (message.type == "note_off" or message.velocity == 0):
                down.remove(message.note)
            elif message.type == "note_on" and message.velocity > 0:
                down = [note for note in down if note != message.note] + [message.note]
        if down:
            sounding = {"last": down[-1], "low": min(down), "high": max(down)}[settings.priority]
        elif not pedal:
            sounding = None
        assert player.now.note == sounding
        assert player.now.gate is (sounding is not None)
        assert player.keys_down == tuple(down)
        if sounding is not None:
            assert player.now.key_volts == pytest.approx((sounding - 36) / 12)


@given(set_up, st.lists(anything, max_size=60))
def test_all_keys_and_the_pedal_up_closes_the_gate(settings, messages):
    player = Player(settings)
    for message in messages:
        player.handle(message)
    for note in range(128):
        player.handle(off(note))
    player.handle(cc(64, 0))
    assert not player.now.gate
    assert player.keys_down == ()


@given(set_up, st.lists(anything, max_size=60))
def test_volts_are_those_of_a_played_key_and_the_bend(settings, messages):
    player = Player(settings)
    played = {36}  # 0 V before the first key
    bend = 0
    for message in messages:
        player.handle(message)
        if message.type == "note_on" and message.velocity > 0:
            played.add(message.note)
        if message.type == "pitchwheel":
            bend = message.pitch
        if message.type == "control_change" and message.control == 121:
            bend = 0
        bend_volts = player.bend_range_semitones * bend / 8192 / 12
        note = (player.now.key_volts - bend_volts) * 12 + 36
        assert min(abs(note - key) for key in played) < 1e-9


@given(set_up, st.lists(anything, max_size=60))
def test_a_moment_is_told_exactly_when_the_state_moved(settings, messages):
    player = Player(settings)
    for message in messages:
        before = player.now
        moment = player.handle(message)
        if moment is None:
            assert player.now == before
        else:
            steady = Moment(
                moment.key_volts, moment.gate, moment.velocity, moment.bypassed, moment.note
            )
            assert player.now == steady
            struck = message.type == "note_on" and message.velocity > 0
            assert steady != before or struck or moment != steady


def test_the_portamento_switch_can_be_overruled():
    player = Player(PlayerSettings(heed_portamento_switch=False))
    player.handle(Message("control_change", control=65, value=0))
    player.handle(Message("control_change", control=121, value=0))
    moment = player.handle(Message("note_on", note=60, velocity=90))
    assert not moment.bypassed
