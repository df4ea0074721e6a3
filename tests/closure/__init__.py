"""Studies on simulated truth: bias, spread, pull and coverage, the yardstick beside them.

    python -m tests.closure --runs 400 --jobs 2

The ordinary test run takes the quick part, ``test_quick.py``.
"""

import sys
from pathlib import Path

# The yardstick stands in the neighbouring folder, and pytest and `python -m tests.closure` name
# this package differently.
TESTS = str(Path(__file__).resolve().parents[1])
if TESTS not in sys.path:
    sys.path.insert(0, TESTS)
