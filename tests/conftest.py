"""What holds for all tests."""

from __future__ import annotations

import signal

import numpy as np
import pytest

# A job in the background of a shell inherits an ignored SIGINT and hands it on to the processes
# that the tests start and interrupt.
if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
    signal.signal(signal.SIGINT, signal.default_int_handler)


_approx = pytest.approx


def _without_floor(expected, rel=None, **more):
    """`pytest.approx`, but numbers of the size of h are compared by their ratio.

    Its own absolute tolerance of 1e-12 lets any two values in J s pass for equal.
    """
    if more.get("abs") is None:
        values = list(expected.values()) if isinstance(expected, dict) else expected
        sizes = np.abs(np.array(values, dtype=float))
        if 0.0 < np.nanmax(sizes, initial=0.0) < 1e-9:
            rel, more["abs"] = 1e-6 if rel is None else rel, 0.0
    return _approx(expected, rel, **more)


pytest.approx = _without_floor
