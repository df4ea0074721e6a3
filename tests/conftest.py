"""What holds for all tests."""

from __future__ import annotations

import signal

# A job in the background of a shell inherits an ignored SIGINT and hands it on to the processes
# that the tests start and interrupt.
if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
    signal.signal(signal.SIGINT, signal.default_int_handler)
