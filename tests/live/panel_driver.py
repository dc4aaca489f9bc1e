"""Shows a pickled snapshot on this terminal, with keys: what the terminal tests run inside tmux.

Keys: ? help, q leave, x raise, k kill this process, c kill the panel's, n count the next message.
"""

import itertools
import multiprocessing
import os
import pickle
import signal
import sys
from dataclasses import replace
from pathlib import Path

from livelag.live.keys import KeyReader
from livelag.live.panel_process import PanelProcess


def main():
    snapshot = pickle.loads(Path(sys.argv[1]).read_bytes())
    help_shown, counted = False, 0
    panel = PanelProcess()
    with panel, KeyReader() as reader:
        for turn in itertools.count():
            # The knob moves, so that there is something new to draw every time.
            rotation = 0.4 + 0.001 * (turn % 100)
            shown = replace(snapshot, rotation=rotation, message=f"counted {counted}")
            panel.show(shown)
            for key in reader.read_keys(1 / 15):
                if key == "q":
                    return
                if key == "x":
                    raise RuntimeError("driver failed")
                if key == "k":
                    os.kill(os.getpid(), signal.SIGKILL)
                if key == "c":
                    os.kill(multiprocessing.active_children()[0].pid, signal.SIGKILL)
                if key == "n":
                    counted += 1
                if key == "?":
                    help_shown = not help_shown
                    panel.help(help_shown)
            if panel.problem:
                print(f"\r\npanel: {panel.problem}")
                return


if __name__ == "__main__":
    main()
    print("driver left")
