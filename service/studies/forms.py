"""The table of cases in the forms a client may have it: JSON, JSON lines, CSV and binary columns."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from pydantic_core import to_json

from service.cells import as_cell
from service.media import ARRAYS_FORM, JSON_FORM, Form
from service.studies.store import Study, Table
from service.translation.table_of_cases import failures_shown


def table_shown(study: Study, table: Table) -> dict[str, Any]:
    """The table column by column, as its forms take it."""
    evaluations = table.evaluations
    return {
        "study_id": study.study_id,
        "state": study.state,
        "case": table.case,
        "numbers": [
            {"name": column.name, "unit": column.unit, "values": table.numbers[:, index]}
            for index, column in enumerate(table.columns.numbers)
        ],
        "columns": [
            {
                "name": column.name,
                "unit": column.unit,
                "values": evaluations.values[:, index],
                "error_bounds": evaluations.bounds[:, index],
            }
            for index, column in enumerate(table.columns.results)
        ],
        "failures": failures_shown(evaluations.failures),
    }


@dataclass(frozen=True)
class _Row:
    """One case. What is not finite is None."""

    case: int
    numbers: list[float | None]
    values: list[float | None]
    bounds: list[float | None]
    failure: dict[str, Any] | None


def _rows(shown: dict[str, Any]) -> Iterator[_Row]:
    failures = {failure["case"]: failure for failure in shown["failures"]}
    groups = (("numbers", "values"), ("columns", "values"), ("columns", "error_bounds"))
    columns = [[column[key].tolist() for column in shown[group]] for group, key in groups]
    for row, case in enumerate(shown["case"].tolist()):
        numbers, values, bounds = ([_finite(column[row]) for column in group] for group in columns)
        yield _Row(case, numbers, values, bounds, failures.get(case))


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _json_lines(shown: dict[str, Any]) -> bytes:
    """One object a line for each case, which carries the names but not the units."""
    given, found = ([column["name"] for column in shown[group]] for group in ("numbers", "columns"))
    lines = []
    for row in _rows(shown):
        line = {
            "case": row.case,
            "numbers": dict(zip(given, row.numbers, strict=True)),
            "values": dict(zip(found, row.values, strict=True)),
            "error_bounds": dict(zip(found, row.bounds, strict=True)),
        }
        if row.failure is not None:
            line["failure"] = {key: row.failure[key] for key in ("code", "message")}
        lines.append(to_json(line))
    return b"".join(line + b"\n" for line in lines)


def _csv(shown: dict[str, Any]) -> bytes:
    """RFC 4180: numbers, each result with its bound, and what failed; empty where there is no number."""
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\r\n")
    heads = [f"{column['name']} [{column['unit']}]" for column in shown["numbers"]]
    for column in shown["columns"]:
        heads += [f"{column['name']} [{column['unit']}]", f"{column['name']} error bound"]
    writer.writerow(["case", *map(as_cell, heads), "failure code", "failure"])
    for row in _rows(shown):
        results = [number for pair in zip(row.values, row.bounds, strict=True) for number in pair]
        said = ["", ""] if row.failure is None else [row.failure["code"], as_cell(row.failure["message"])]
        # The shortest text that is read back as the same double.
        cells = ("" if number is None else repr(number) for number in (*row.numbers, *results))
        writer.writerow([row.case, *cells, *said])
    return text.getvalue().encode()


JSON_TABLE = Form(JSON_FORM.media_type, 25, "cases.json", JSON_FORM.encode)
LINES_TABLE = Form("application/jsonl", 50, "cases.jsonl", _json_lines)
CSV_TABLE = Form("text/csv", 25, "cases.csv", _csv)
BINARY_TABLE = Form(ARRAYS_FORM.media_type, 8, "cases.npz", ARRAYS_FORM.encode)
TABLE_FORMS = (JSON_TABLE, LINES_TABLE, CSV_TABLE, BINARY_TABLE)

# What browsers, which choose no Accept of their own, may write into the address.
FORM_OF_WORD = {"json": JSON_TABLE, "jsonl": LINES_TABLE, "csv": CSV_TABLE, "npz": BINARY_TABLE}
