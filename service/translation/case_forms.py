"""A table of cases as text, a case a row or a line: CSV (RFC 4180) and JSON lines."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import chain
from typing import Any

import numpy as np
from pydantic_core import to_json

from service.cells import as_cell


@dataclass(frozen=True)
class _Row:
    """One case. What is not finite in it is not told. held: what is said of each limit."""

    case: int
    numbers: list[float]
    values: list[float]
    bounds: list[float]
    margins: list[float]
    held: list[str | None]
    failure: dict[str, Any] | None


def _rows(shown: dict[str, Any]) -> Iterator[_Row]:
    """The cases of a table that is given column by column; without `case` they are counted from 0."""
    failures = {failure["case"]: failure for failure in shown["failures"]}
    cases: Sequence[int] = shown["case"].tolist() if "case" in shown else range(shown["case_count"])
    groups = (("numbers", "values"), ("columns", "values"), ("columns", "error_bounds"), ("limits", "margins"))
    tables = [np.array([column[key] for column in shown[group]]).reshape(-1, len(cases)).T for group, key in groups]
    rows = zip(cases, *(table.tolist() for table in tables), strict=True)
    for row, (case, numbers, values, bounds, margins) in enumerate(rows):
        held = [column["held"][row] for column in shown["limits"]]
        yield _Row(case, numbers, values, bounds, margins, held, failures.get(case))


def table_lines(shown: dict[str, Any]) -> bytes:
    """One object a line for each case, which carries the names but not the units; limits in their order."""
    given, found = ([column["name"] for column in shown[group]] for group in ("numbers", "columns"))
    lines = []
    for row in _rows(shown):
        line = {
            "case": row.case,
            "numbers": dict(zip(given, row.numbers, strict=True)),
            "values": dict(zip(found, row.values, strict=True)),
            "error_bounds": dict(zip(found, row.bounds, strict=True)),
            "limits": [{"margin": margin, "held": held} for margin, held in zip(row.margins, row.held, strict=True)],
        }
        if row.failure is not None:
            line["failure"] = {key: row.failure[key] for key in ("code", "message")}
        lines.append(to_json(line, inf_nan_mode="null"))
    return b"".join(line + b"\n" for line in lines)


def table_csv(shown: dict[str, Any]) -> bytes:
    """RFC 4180: numbers, each result with its bound, each limit with its margin and whether it holds, what failed.

    Empty where there is nothing to tell.
    """
    return csv_head(shown) + csv_rows(shown)


def csv_head(shown: dict[str, Any]) -> bytes:
    """The first row of a table, with the names of its columns."""
    heads = [f"{column['name']} [{column['unit']}]" for column in shown["numbers"]]
    for column in shown["columns"]:
        heads += [f"{column['name']} [{column['unit']}]", f"{column['name']} error bound"]
    for limit in shown["limits"]:
        name = _name_of(limit, shown["columns"])
        heads += [f"{name} margin [{limit['unit_of_margins']}]", f"{name} held"]
    return _csv_line(["case", *map(as_cell, heads), "failure code", "failure"])


def csv_rows(shown: dict[str, Any]) -> bytes:
    """A row for each case."""
    return b"".join(map(_csv_row, _rows(shown)))


def _csv_row(row: _Row) -> bytes:
    results = chain.from_iterable(zip(row.values, row.bounds, strict=True))
    limits = chain.from_iterable(zip(row.margins, row.held, strict=True))
    # Numbers and words without commas, which JSON writes as CSV does but for quotes and null, and far faster.
    told = to_json([row.case, *row.numbers, *results, *limits], inf_nan_mode="null")[1:-1]
    told = told.translate(None, b'"').replace(b"null", b"")
    said = ["", ""] if row.failure is None else [row.failure["code"], as_cell(row.failure["message"])]
    return told + b"," + _csv_line(said)


def _csv_line(cells: list[str]) -> bytes:
    text = io.StringIO(newline="")
    csv.writer(text, lineterminator="\r\n").writerow(cells)
    return text.getvalue().encode()


def _name_of(limit: dict[str, Any], results: list[dict[str, Any]]) -> str:
    """What a limit is called: its name, or what it says."""
    if "name" in limit:
        return str(limit["name"])
    unit = next(column["unit"] for column in results if column["name"] == limit["result"])
    sides = (f"{words} {limit[key]:g} {unit}" for key, words in _SIDES.items() if key in limit)
    return f"{limit['result']} {' and '.join(sides)}"


_SIDES = {"at_least": "at least", "at_most": "at most"}
