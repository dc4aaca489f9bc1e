"""For every test: signals as in a shell's foreground, and under CI the same examples each time."""

import os
import signal

from hypothesis import settings


def pytest_configure():
    """Set both up."""
    # A run on a build machine judges the change; new examples are looked for at home.
    settings.register_profile("ci", derandomize=True, deadline=None, print_blob=True)
    if os.environ.get("CI"):
        settings.load_profile("ci")
    # Programs begun in a shell's background ignore Ctrl-C and Ctrl-Z, and so would every program
    # that the tests start and stop.
    for name, handler in (("SIGINT", signal.default_int_handler), ("SIGTSTP", signal.SIG_DFL)):
        number = getattr(signal, name, None)
        if number is not None and signal.getsignal(number) == signal.SIG_IGN:
            signal.signal(number, handler)
