"""A table of cases as text, a case a row or a line: CSV (RFC 4180) and JSON lines."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from pydantic_core import to_json

from service.cells import as_cell


@dataclass(frozen=True)
class _Row:
    """One case. What is not finite is None. held: what is said of each limit."""

    case: int
    numbers: list[float | None]
    values: list[float | None]
    bounds: list[float | None]
    margins: list[float | None]
    held: list[str | None]
    failure: dict[str, Any] | None


def _rows(shown: dict[str, Any]) -> Iterator[_Row]:
    """The cases of a table that is given column by column; without `case` they are counted from 0."""
    failures = {failure["case"]: failure for failure in shown["failures"]}
    groups = (("numbers", "values"), ("columns", "values"), ("columns", "error_bounds"), ("limits", "margins"))
    columns = [[column[key].tolist() for column in shown[group]] for group, key in groups]
    cases: Sequence[int] = shown["case"].tolist() if "case" in shown else range(shown["case_count"])
    for row, case in enumerate(cases):
        numbers, values, bounds, margins = ([_finite(column[row]) for column in group] for group in columns)
        held = [column["held"][row] for column in shown["limits"]]
        yield _Row(case, numbers, values, bounds, margins, held, failures.get(case))


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def lines_of(pieces: Iterable[dict[str, Any]]) -> Iterator[bytes]:
    """One object a line for each case, which carries the names but not the units; limits in their order.

    pieces: the table column by column, in one piece or in several.
    """
    for shown in pieces:
        yield table_lines(shown)


def table_lines(shown: dict[str, Any]) -> bytes:
    """The same of a table in one piece."""
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
        lines.append(to_json(line))
    return b"".join(line + b"\n" for line in lines)


def csv_of(pieces: Iterable[dict[str, Any]]) -> Iterator[bytes]:
    """RFC 4180: numbers, each result with its bound, each limit with its margin and whether it holds, what failed.

    pieces: the table column by column, in one piece or in several. Empty where there is nothing to tell.
    """
    for number, shown in enumerate(pieces):
        text = io.StringIO(newline="")
        writer = csv.writer(text, lineterminator="\r\n")
        if number == 0:
            writer.writerow(_heads(shown))
        for row in _rows(shown):
            results = (_cell(number) for pair in zip(row.values, row.bounds, strict=True) for number in pair)
            limits = (
                cell for margin, held in zip(row.margins, row.held, strict=True) for cell in (_cell(margin), held)
            )
            said = ["", ""] if row.failure is None else [row.failure["code"], as_cell(row.failure["message"])]
            writer.writerow([row.case, *map(_cell, row.numbers), *results, *limits, *said])
        yield text.getvalue().encode()


def table_csv(shown: dict[str, Any]) -> bytes:
    """The same of a table in one piece."""
    return b"".join(csv_of((shown,)))


def _heads(shown: dict[str, Any]) -> list[str]:
    heads = [f"{column['name']} [{column['unit']}]" for column in shown["numbers"]]
    for column in shown["columns"]:
        heads += [f"{column['name']} [{column['unit']}]", f"{column['name']} error bound"]
    for limit in shown["limits"]:
        name = _name_of(limit, shown["columns"])
        heads += [f"{name} margin [{limit['unit_of_margins']}]", f"{name} held"]
    return ["case", *map(as_cell, heads), "failure code", "failure"]


def _cell(number: float | None) -> str:
    """The shortest text that is read back as the same double."""
    return "" if number is None else repr(number)


def _name_of(limit: dict[str, Any], results: list[dict[str, Any]]) -> str:
    """What a limit is called: its name, or what it says."""
    if "name" in limit:
        return str(limit["name"])
    unit = next(column["unit"] for column in results if column["name"] == limit["result"])
    sides = (f"{words} {limit[key]:g} {unit}" for key, words in _SIDES.items() if key in limit)
    return f"{limit['result']} {' and '.join(sides)}"


_SIDES = {"at_least": "at least", "at_most": "at most"}
