"""The table of cases of a study in the forms a client may have it: JSON, JSON lines, CSV and binary columns."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from typing import Any

from service.media import ARRAYS_FORM, JSON_FORM, Form
from service.studies.store import Study, Table
from service.translation.case_columns import columns_shown
from service.translation.case_forms import csv_of, lines_of, table_csv, table_lines


def table_shown(study: Study, table: Table) -> dict[str, Any]:
    """The table column by column, as its forms take it."""
    columns = columns_shown(table.columns, table.numbers, table.evaluations)
    return {"study_id": study.study_id, "state": study.state, "case": table.case, **columns}


JSON_TABLE = Form(JSON_FORM.media_type, 25, "cases.json", JSON_FORM.encode)
LINES_TABLE = Form("application/jsonl", 50, "cases.jsonl", table_lines)
CSV_TABLE = Form("text/csv", 25, "cases.csv", table_csv)
BINARY_TABLE = Form(ARRAYS_FORM.media_type, 8, "cases.npz", ARRAYS_FORM.encode)
TABLE_FORMS = (JSON_TABLE, LINES_TABLE, CSV_TABLE, BINARY_TABLE)

# What browsers, which choose no Accept of their own, may write into the address.
FORM_OF_WORD = {"json": JSON_TABLE, "jsonl": LINES_TABLE, "csv": CSV_TABLE, "npz": BINARY_TABLE}

# Forms that are made of pieces of a table, as `table_shown` gives them, so that it may be of any length.
IN_PIECES: Mapping[Form, Callable[[Iterable[dict[str, Any]]], Iterator[bytes]]] = {
    LINES_TABLE: lines_of,
    CSV_TABLE: csv_of,
}


def size_at_most(study: Study, form: Form) -> int:
    """Bytes that the table of the cases that are done takes in a form, at most but for failures in words."""
    columns = study.columns
    # Whether a limit holds is a word of no more than a number has digits.
    numbers = 1 + len(columns.numbers) + 2 * len(columns.results) + 3 * len(columns.limits)
    return study.done * numbers * form.bytes_a_number
