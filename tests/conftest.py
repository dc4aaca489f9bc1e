"""For every test: signals as in a shell's foreground."""

import signal


def pytest_configure():
    """Undo what a shell does to programs begun in its background.

    They ignore Ctrl-C and Ctrl-Z, and so would every program that the tests start and stop.
    """
    for name, handler in (("SIGINT", signal.default_int_handler), ("SIGTSTP", signal.SIG_DFL)):
        number = getattr(signal, name, None)
        if number is not None and signal.getsignal(number) == signal.SIG_IGN:
            signal.signal(number, handler)
