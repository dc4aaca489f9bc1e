"""What a machine must have for some tests: without it they skip, but under CI they fail."""

import os

import pytest


def require(reason):
    """Skip for a reason, if there is one; under CI fail."""
    if reason and os.environ.get("CI"):
        pytest.fail(reason)
    if reason:
        pytest.skip(reason)
