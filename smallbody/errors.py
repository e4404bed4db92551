"""Everything that can go wrong on purpose: what was seen, where, and what would have been right.

Every error raised for the caller's benefit is a `SmallbodyError`; the command line prints its one line and leaves
with its exit code. What is worth saying but stops nothing is a warning of category `Note`.
"""

from __future__ import annotations

from typing import Any


class SmallbodyError(Exception):
    """Base of all errors that a user can mend. `details` carries the numbers, for whoever logs and goes on."""

    exit_code = 2

    def __init__(self, message: str, **details: Any) -> None:
        super().__init__(message)
        self.details = details


class BodyError(SmallbodyError):
    """A body description is wrong: file, key, value and the allowed range are in the message."""


class ShapeError(SmallbodyError):
    """A shape cannot be read, checked, mended or made."""


class SizeMismatch(SmallbodyError):
    """Arrays that should belong together have different lengths."""


class NotSettled(SmallbodyError):
    """An iteration ended before its tolerance; the best state so far is in `details`."""


class StoreError(SmallbodyError):
    """A result cannot be written or read."""


class FigureError(SmallbodyError):
    """A picture cannot be drawn from this file."""


class Note(UserWarning):
    """Something worth knowing that stops nothing."""
