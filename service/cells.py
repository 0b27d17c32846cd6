"""Texts as cells of a table that people open in a spreadsheet.

A spreadsheet takes a cell that begins with = + - @ or a tab for a formula, and runs it; a text that begins so is
written with an apostrophe before it, which a spreadsheet takes for the mark of a text.
"""

from __future__ import annotations

# What a cell of a formula begins with.
_FORMULA_MARKS = ("=", "+", "-", "@", "\t", "\r")


def as_cell(text: str) -> str:
    """A text as a cell that no spreadsheet takes for a formula."""
    return f"'{text}" if text.startswith(_FORMULA_MARKS) else text
