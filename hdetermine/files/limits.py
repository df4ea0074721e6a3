"""How much is read at most: named limits, so that no input can exhaust the machine.

They lie far above any honest run and are stated in the README.
"""

from __future__ import annotations

from hdetermine.errors import InputError

MAX_SHEET_BYTES = 262_144
"""Size of a run sheet or claim, bytes."""

MAX_TABLE_BYTES = 16_000_000
"""Size of a scan table, bytes."""

MAX_RUN_BYTES = 48_000_000
"""Size of all files of a run together, bytes."""

MAX_EXPANDED_BYTES = 64_000_000
"""Size of everything inside a spreadsheet, unpacked, bytes."""

MAX_ARCHIVE_ENTRIES = 1_000
"""Files inside a spreadsheet."""

MAX_SHEETS = 100
"""Sheets in a spreadsheet."""

MAX_LINE_CHARACTERS = 20_000
"""Length of one line of a text file."""

MAX_LINE_DOTS = 1_000
"""Dots in one line of a run sheet or claim."""

MAX_RESULT_BYTES = 64_000_000
"""Size of a result file that the budget is worked out from again, bytes."""

MAX_ROWS = 100_000
"""Rows of a table."""

MAX_COLUMNS = 300
"""Columns of a table."""

MAX_CELLS = 2_000_000
"""Rows times columns of a table."""

MAX_SCANS = 200
"""Scans of a run."""

MAX_POINTS = 50_000
"""Points of a scan."""

MAX_RUN_POINTS = 2_000_000
"""Points of all scans of a run together."""

MAX_GROUPS = 1_000
"""Groups of a class."""

MAX_NESTING = 20
"""Depth of brackets in a run sheet."""

MAX_TEXT_CHARACTERS = 500
"""Length of a title, name, source or note."""

MAX_COUNTS = 1_000_000_000_000
"""Counts of one point."""

MAX_FOLDER_ENTRIES = 5_000
"""Entries of a run folder that are looked at when a run sheet is drafted."""


def check_limit(found: int, limit: int, where: str, what: str) -> None:
    """Refuse more than a limit allows.

    Parameters
    ----------
    found, limit : int
        Number found and number allowed.
    where : str
        File, as the message names it.
    what : str
        What is counted, plural.

    Raises
    ------
    InputError
        If `found` is greater than `limit`.
    """
    if found > limit:
        raise InputError(
            f"{where}: {found} {what} are more than the {limit} that are read; split the file "
            "or shorten it."
        )
