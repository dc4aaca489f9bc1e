"""No command writes over a file that it reads, by whatever name."""

import shutil

import pytest

from livelag.circuit.presets import presets_folder

TIMES = ("--shortest", "2ms", "--handover", "70ms", "--longest", "2.4s")


@pytest.fixture
def desk(tmp_path, make_song):
    """A folder with a preset, a song, a drawer and marks; returns what each file holds."""
    shutil.copy(presets_folder() / "two-range-film.toml", tmp_path / "p.toml")
    make_song()
    (tmp_path / "d.csv").write_text(
        "part,value,kind,quantity\nresistor,2k2,,1\npot,220k,,1\ncapacitor,1u,polyester,1\n"
        "capacitor,10u,bipolar electrolytic,1\n",
        encoding="utf-8",
    )
    (tmp_path / "m.toml").write_text('version = 1\nshortest = "2ms"\nlongest = "2s"\n')
    (tmp_path / "link").symlink_to(tmp_path)
    return {path: path.read_bytes() for path in tmp_path.iterdir() if path.is_file()}


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("ranges", "p.toml", "--csv", "p.toml"), "--csv is 'p.toml', which is the preset"),
        (("ranges", "p.toml", "--csv", "link/p.toml"), "--csv is 'link/p.toml', which is"),
        (("tuning", "./p.toml", "--csv", "p.toml"), "--csv is 'p.toml', which is the preset"),
        (("spread", "p.toml", "--build", "1", "--save", "p.toml"), "--save is 'p.toml', which is"),
        (("arrival", "--midi", "song.mid", "--csv", "song.mid"), "which is the MIDI file"),
        (("render", "--midi", "song.mid", "--out", "x.wav", "--cv", "song.mid"), "the MIDI file"),
        (("render", "p.toml", "--out", "x.wav", "--cv", "link/p.toml"), "which is the preset"),
        (("sheet", "p.toml", "--csv", "p.toml"), "--csv is 'p.toml', which is the preset"),
        (("parts", *TIMES, "--drawer", "d.csv", "--csv", "d.csv"), "which is the drawer"),
        (("parts", "--marks", "m.toml", "--save", "m.toml"), "which is the marks file; name"),
        (("parts", *TIMES, "--preset", "p.toml", "--save", "p.toml"), "which is the preset"),
        (("ranges", "--csv", "x.svg", "--picture", "link/x.svg"), "name the same file"),
        (("sheet", "--out", "x.pdf", "--csv", "link/x.pdf"), "--csv and --out name the same file"),
    ],
)
def test_what_is_read_is_kept(refused, tmp_path, desk, arguments, said):
    assert said in refused(*arguments)
    assert {path: path.read_bytes() for path in tmp_path.iterdir() if path.is_file()} == desk


def test_a_file_may_have_the_name_of_a_shipped_preset(livelag, tmp_path):
    assert livelag("render", "ideal", "--ranges", "all", "--out", "ideal").status == 0
    assert (tmp_path / "ideal" / "index.csv").is_file()
