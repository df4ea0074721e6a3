"""The one kind of error a user can mend."""

from __future__ import annotations


class InputError(Exception):
    """Something about the input that only its owner can put right.

    The message is one sentence that says what is wrong, where, and what to do. The command
    line prints it and ends with exit status 2.
    """
