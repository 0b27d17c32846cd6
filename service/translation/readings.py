"""Tables of readings: from text, and with missing entries filled where that was asked for."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.linalg import spsolve

from service.number_range import is_readable

FloatArray = NDArray[np.float64]

_MISSING = frozenset({"", "-", "na", "n/a", "nan", "null"})


class ReadingsError(ValueError):
    """A table that cannot be read. The message is a sentence for the client."""


@dataclass(frozen=True)
class Readings:
    """Readings on rectilinear axes.

    table: one row for each place on the first axis; NaN where one is missing.
    """

    first_axis: list[float]
    second_axis: list[float]
    table: FloatArray


def readings_of_csv(text: str) -> Readings:
    """Readings of a text whose first row and first column are the axes; the corner is free.

    Raises ReadingsError, with row and column counted from 1 as a spreadsheet shows them.
    """
    rows, _, decimal_comma = rows_of_csv(text)
    if len(rows) < 3 or len(rows[0]) < 3:
        raise ReadingsError(
            "The text needs a first row with at least two places on the second axis and at least two more "
            "rows, each with a place on the first axis and its readings."
        )
    width = len(rows[0])
    for number, row in enumerate(rows, start=1):
        if len(row) != width:
            raise ReadingsError(f"Row {number} has {len(row)} entries; the first row has {width}.")
    second = [_place(entry, 1, column, decimal_comma) for column, entry in enumerate(rows[0][1:], start=2)]
    first = [_place(row[0], number, 1, decimal_comma) for number, row in enumerate(rows[1:], start=2)]
    table = [
        [_reading(entry, number, column, decimal_comma) for column, entry in enumerate(row[1:], start=2)]
        for number, row in enumerate(rows[1:], start=2)
    ]
    return Readings(first, second, np.array(table))


def rows_of_csv(text: str) -> tuple[list[list[str]], list[int], bool]:
    """Rows of entries that are not all empty, the lines they end on, and whether a comma in a number is a decimal one.

    Lines are counted from 1. A semicolon or tab in the first row separates; otherwise a comma does. Raises
    ReadingsError.
    """
    # Spreadsheets mark a text as Unicode by a character in front.
    text = text.removeprefix("\ufeff")
    first_row = text.lstrip("\r\n").partition("\n")[0]
    delimiter = next((sign for sign in ("\t", ";") if sign in first_row), ",")
    try:
        reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
        numbered = [(row, reader.line_num) for row in reader if any(entry.strip() for entry in row)]
    except csv.Error:
        raise ReadingsError("The text is not readable as CSV; leave quotation marks out.") from None
    return [row for row, _ in numbered], [line for _, line in numbered], delimiter != ","


def number_of(entry: str, decimal_comma: bool) -> float | None:
    """The number of an entry, None if it is none that is read."""
    if decimal_comma and entry.count(",") == 1 and "." not in entry:
        entry = entry.replace(",", ".")
    if "_" in entry or len(entry) > 40:
        return None
    try:
        number = float(entry)
    except ValueError:
        return None
    return number if is_readable(number) else None


def _place(entry: str, row: int, column: int, decimal_comma: bool) -> float:
    number = number_of(entry.strip(), decimal_comma)
    if number is None:
        raise ReadingsError(f"Row {row}, column {column} has to be a place on the axis, a bare number.")
    return number


def _reading(entry: str, row: int, column: int, decimal_comma: bool) -> float:
    entry = entry.strip()
    if entry.lower() in _MISSING:
        return np.nan
    number = number_of(entry, decimal_comma)
    if number is None:
        raise ReadingsError(f"Row {row}, column {column} has to be a reading, a bare number, or empty.")
    return number


def fill_smoothly(readings: Readings) -> Readings:
    """Missing readings filled so that each is the mean of its neighbours, weighted by their nearness.

    The filled entries u solve, on the rectilinear axes, sum over neighbours of w (u_neighbour - u) = 0 with w
    the width of the strip between divided by the distance: the discrete Laplace equation. So no filled entry
    lies outside the readings around it. Raises ReadingsError when there is no reading at all.
    """
    missing = np.isnan(readings.table)
    if missing.all():
        raise ReadingsError("The table has no reading at all.")
    if not missing.any():
        return readings
    number = np.cumsum(missing).reshape(missing.shape) - 1
    count = int(missing.sum())
    diagonal, known = np.zeros(count), np.zeros(count)
    rows: list[NDArray[np.intp]] = []
    columns: list[NDArray[np.intp]] = []
    weights: list[FloatArray] = []
    for here, there, weight in _neighbours(readings):
        wanted = missing[here]
        index, other = number[here][wanted], missing[there][wanted]
        w = weight[wanted]
        np.add.at(diagonal, index, w)
        np.add.at(known, index[~other], (w * readings.table[there][wanted])[~other])
        rows.append(index[other])
        columns.append(number[there][wanted][other])
        weights.append(-w[other])
    every = np.arange(count)
    matrix = csr_array(
        (
            np.concatenate([diagonal, *weights]),
            (np.concatenate([every, *rows]), np.concatenate([every, *columns])),
        ),
        shape=(count, count),
    )
    table = readings.table.copy()
    table[missing] = spsolve(matrix.tocsc(), known)
    return Readings(readings.first_axis, readings.second_axis, table)


Part = tuple[slice, slice]


def _neighbours(readings: Readings) -> list[tuple[Part, Part, FloatArray]]:
    """For each of the four directions: entries, their neighbours, and the weight of each pair."""
    first, second = np.asarray(readings.first_axis), np.asarray(readings.second_axis)
    along_first = _strips(second)[None, :] / np.diff(first)[:, None]
    along_second = _strips(first)[:, None] / np.diff(second)[None, :]
    every, low, high = slice(None), slice(None, -1), slice(1, None)
    return [
        ((low, every), (high, every), along_first),
        ((high, every), (low, every), along_first),
        ((every, low), (every, high), along_second),
        ((every, high), (every, low), along_second),
    ]


def _strips(axis: FloatArray) -> FloatArray:
    """Width of the strip that belongs to each place of an axis."""
    gaps = np.diff(axis)
    strips: FloatArray = 0.5 * (np.concatenate([gaps[:1] * 0, gaps]) + np.concatenate([gaps, gaps[:1] * 0]))
    return strips
