"""Exact constants of the SI (BIPM, The International System of Units, 9th ed., 2019).

The Planck constant is deliberately *not* here: it stands alone in `reference`, which only the
comparison and the simulator may import, so that the answer cannot leak into the fit.
"""

from __future__ import annotations

SPEED_OF_LIGHT_M_PER_S = 299_792_458.0
ELEMENTARY_CHARGE_C = 1.602_176_634e-19

PLANCK_PER_SLOPE = ELEMENTARY_CHARGE_C / SPEED_OF_LIGHT_M_PER_S * 1e-9
"""h in J s per pm kV of slope: h = (e/c) * (lambda * U), 1 pm kV = 1e-9 m V."""

CLASSICAL_ELECTRON_RADIUS_PM = 2.817_940_3205e-3
"""CODATA 2022 (as carried by scipy.constants), pm."""
