"""The README tells the truth: every command shown with its output gives that output."""

import re
import shlex
import shutil
from pathlib import Path

import pytest

from livelag.cli.main import run

README = Path(__file__).parent.parent / "README.md"
BLOCKS = re.findall(r"```console\n(.*?)```", README.read_text(encoding="utf-8"), re.DOTALL)


def commands():
    """Each (command, output) of the console blocks, in order."""
    for block in BLOCKS:
        for part in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, _, output = part.partition("\n")
            yield command, output


def trimmed(text):
    return [line.rstrip() for line in text.strip().splitlines() if line.strip()]


def test_every_command_shown_gives_the_output_shown(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    # Commands that read a capture are shown as from a checkout.
    shutil.copytree(README.parent / "tests" / "captures", tmp_path / "tests" / "captures")
    shown = list(commands())
    assert len(shown) >= 3
    for command, output in shown:
        words = shlex.split(command)
        if words[0] == "cat":
            if not Path(words[1]).exists():  # a file that the reader brings
                Path(words[1]).write_text(output, encoding="utf-8")
                continue
            assert trimmed(Path(words[1]).read_text(encoding="utf-8")) == trimmed(output)
            continue
        assert words[0] == "livelag", command
        status = run(words[1:])
        said = capsys.readouterr()
        assert trimmed(said.out + said.err) == trimmed(output), command
        assert status == (1 if output.startswith("livelag: ") else 0), command


@pytest.mark.parametrize("word", ["ears", "qualified", "polarised", "measure"])
def test_the_cautions_are_there(word):
    assert word in README.read_text(encoding="utf-8").lower()
