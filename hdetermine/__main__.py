"""``python -m hdetermine``, and the command ``hdetermine``."""

from __future__ import annotations

import os
import signal
from types import FrameType


def _leave(_number: int, _frame: FrameType | None) -> None:
    os.write(2, b"hdetermine: interrupted.\n")
    os._exit(130)


def main() -> None:
    """Start the command line; as long as it is being imported there is nothing to clear up."""
    for number in (signal.SIGINT, signal.SIGTERM):
        if signal.getsignal(number) is not signal.SIG_IGN:
            signal.signal(number, _leave)
    from hdetermine.cli import main as run

    run()


if __name__ == "__main__":
    main()
