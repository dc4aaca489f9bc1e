"""What typing does, on an engine whose time is the frames it has made."""

from pathlib import Path

import pytest
from test_engine import Bench

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting
from livelag.live.by_ear import LONGEST_S, SHORTEST_S, free_stage
from livelag.live.desk import Desk
from livelag.sound.patch import Patch


@pytest.fixture
def bench():
    return Bench(Patch(load_stage("two-range-film"), rotation=0.5))


@pytest.fixture
def desk(bench, tmp_path):
    return Desk(bench.engine, False, tmp_path / "takes", Setting(0, 0.5))


def settle(bench, desk, blocks=60):
    bench.run(blocks)
    desk.follow()


def test_the_pot_turns_in_small_and_large_steps_and_stops_at_its_ends(bench, desk):
    desk.act("pot_up_small")
    settle(bench, desk, 100)
    assert desk.setting.rotation == pytest.approx(0.5 + 1 / 127, abs=1 / 16256)
    assert bench.engine.patch.setting.rotation == desk.setting.rotation
    for _ in range(12):
        desk.act("pot_up_large")
    settle(bench, desk, 100)
    assert bench.engine.patch.setting.rotation == 1.0
    assert "2.37 s" not in desk.message
    assert "155 ms" in desk.message


def test_quick_turns_add_up_before_the_callback_has_seen_them(bench, desk):
    for _ in range(5):
        desk.act("pot_down_small")
        desk.follow()
    settle(bench, desk, 100)
    assert desk.setting.rotation == pytest.approx(0.5 - 5 / 127, abs=1e-3)


def test_the_range_switch_goes_round(bench, desk):
    desk.act("next_range")
    settle(bench, desk, 100)
    assert bench.engine.patch.setting.range_index == 1
    desk.act("next_range")
    settle(bench, desk, 100)
    assert bench.engine.patch.setting.range_index == 0


def test_a_knob_elsewhere_is_followed(bench, desk):
    from mido import Message

    bench.engine.post(Message("control_change", control=5, value=127))
    settle(bench, desk, 100)
    assert desk.setting.rotation == 1.0


def test_two_settings_are_stored_and_swapped(bench, desk):
    desk.act("swap")
    assert "nothing stored" in desk.message
    desk.act("store_a")
    desk.act("next_range")
    desk.act("pot_up_large")
    desk.act("glide_toggle")
    settle(bench, desk, 100)
    desk.act("store_b")
    desk.act("swap")
    settle(bench, desk, 100)
    assert bench.engine.patch.setting == Setting(0, 0.5)
    assert desk.glide_on
    desk.act("swap")
    settle(bench, desk, 100)
    assert bench.engine.patch.setting.range_index == 1
    assert not bench.engine.patch.player.portamento
    assert desk.slot_text("B") == "slow 0.60 off"


def test_digits_play_a_legato_scale_until_a_rest(bench, desk):
    for degree in (1, 3, 3, 8):
        desk.act(f"degree_{degree}")
        bench.run(4)
    assert bench.engine.patch.player.keys_down == (60,)
    assert bench.engine.patch.counts.notes == 3
    desk.act("octave_up")
    desk.act("degree_1")
    bench.run(4)
    assert bench.engine.patch.player.keys_down == (60,)  # the same key an octave up
    desk.act("rest")
    bench.run(4)
    assert bench.engine.patch.player.keys_down == ()


def test_waveform_and_level_change_in_the_sound(bench, desk):
    desk.act("next_waveform")
    for _ in range(40):
        desk.act("level_up")
    bench.run(4)
    assert bench.engine.patch.get("waveform") == desk.waveform == "pulse"
    assert bench.engine.patch.get("level") == -1.0


def test_takes_are_numbered_and_told(bench, desk):
    for number in (1, 2):
        desk.act("take")
        bench.run(20)
        desk.act("degree_1")
        bench.run(100)
        desk.act("rest")
        bench.run(30)
        desk.recorder.feed.stop()
        bench.run(3)
        desk.act("take")
        assert f"take-{number:03d}.wav" in desk.message
        desk.act("panic")
        bench.run(20)
    assert [path.name for path in desk.takes] == ["take-001.wav", "take-002.wav"]


def test_a_take_folder_that_cannot_be_made_is_told_and_the_sound_goes_on(bench, tmp_path):
    (tmp_path / "file").write_text("")
    desk = Desk(bench.engine, False, tmp_path / "file" / "takes", Setting(0, 0.5))
    desk.act("take")
    assert "file" in desk.message
    bench.run(5)
    assert bench.engine.error is None


def test_marks_need_a_freed_pot_and_keep_their_order(bench, desk, tmp_path):
    desk.act("mark_shortest")
    assert "--by-ear" in desk.message
    stage = free_stage(load_stage("two-range-film"))
    free = Bench(Patch(stage, rotation=0.3))
    ear = Desk(free.engine, True, tmp_path, Setting(0, 0.3))
    ear.act("mark_longest")
    ear.act("pot_up_large")
    ear.act("mark_shortest")
    assert "mark one again" in ear.message
    for _ in range(3):
        ear.act("pot_down_large")
    ear.act("mark_shortest")
    assert ear.marks_out_of_order() == ""
    assert ear.marks["shortest"] < ear.marks["longest"]


def test_every_action_of_the_desk_is_safe_at_any_time(bench, desk):
    for action in (*desk.actions, *reversed(desk.actions)):
        desk.act(action)
        bench.run(2)
    assert bench.engine.error is None
    desk.end_take(stream_runs=False)


@pytest.mark.parametrize("preset", ["two-range-film", "battery-9v", "bipolar-drift"])
def test_the_freed_pot_is_logarithmic_from_half_a_millisecond_to_ten_seconds(preset):
    stage = free_stage(load_stage(preset))
    for turn in (0.0, 0.1, 0.333, 0.5, 0.77, 1.0):
        expected = SHORTEST_S * (LONGEST_S / SHORTEST_S) ** turn
        assert stage.time_constant_s(Setting(0, turn)) == pytest.approx(expected, rel=1e-4)
    assert stage.swing_notes()[1] == pytest.approx(load_stage(preset).swing_notes()[1], abs=0.2)


def test_numbers_of_takes_go_on_where_they_stopped(tmp_path):
    from livelag.live.take import next_take_path

    (tmp_path / "take-001.mid").write_text("")
    assert next_take_path(tmp_path) == Path(tmp_path / "take-002.wav")
