"""The SI value of the Planck constant, for comparison and simulation only.

Import this module nowhere else: a test holds that nothing on the way to the fitted value can
reach it.
"""

from __future__ import annotations

PLANCK_CONSTANT_J_S = 6.626_070_15e-34
"""Exact by definition (BIPM, The International System of Units, 9th ed., 2019)."""
