"""The table of cases of a study in the forms a client may have it: JSON, JSON lines, CSV and binary columns."""

from __future__ import annotations

from typing import Any

from service.media import ARRAYS_FORM, JSON_FORM, Form
from service.studies.store import Study, Table
from service.translation.case_columns import columns_shown
from service.translation.case_forms import table_csv, table_lines


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
