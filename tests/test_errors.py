"""Errors: built-ins as well, and whole after a journey between processes."""

import pickle

import pytest

from livelag import errors


@pytest.mark.parametrize(
    ("kind", "builtin"),
    [
        (errors.InputError, ValueError),
        (errors.MidiFileError, ValueError),
        (errors.UnknownNameError, LookupError),
        (errors.FileError, OSError),
        (errors.DeviceError, RuntimeError),
    ],
)
def test_each_refines_a_built_in(kind, builtin):
    assert issubclass(kind, builtin)
    assert issubclass(kind, errors.LivelagError)


def test_an_unknown_name_offers_the_nearest_and_survives_pickling():
    error = errors.UnknownNameError("range", "slwo", ("fast", "slow"), "a.toml")
    assert str(error) == "a.toml: unknown range 'slwo'; did you mean 'slow'? known: fast, slow"
    again = pickle.loads(pickle.dumps(error))
    assert str(again) == str(error)
    assert again.known == ("fast", "slow")
