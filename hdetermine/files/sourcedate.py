"""The date that a build states for files made without a clock: ``SOURCE_DATE_EPOCH``."""

from __future__ import annotations

import os

_LATEST = 4_000_000_000
"""Seconds since 1970; what lies beyond is no date that every format can hold."""


def source_date() -> int | None:
    """Seconds since 1970 that the environment states; None where it states no such number."""
    stated = os.environ.get("SOURCE_DATE_EPOCH", "")
    if not (stated.isascii() and stated.isdecimal() and len(stated) <= len(str(_LATEST))):
        return None
    return seconds if (seconds := int(stated)) <= _LATEST else None
