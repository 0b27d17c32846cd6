"""The table of cases of a study in the forms a client may have it: JSON and binary columns, or JSON lines and CSV.

The first two are made as a whole and may have no more than a limit; of the others no more than a page is in memory.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

from service.media import ARRAYS_FORM, JSON_FORM, Form
from service.studies.answers import check_size
from service.studies.pages import Extent, Table, joined, pages, whole_table
from service.studies.store import StudyStore
from service.translation.case_columns import columns_shown
from service.translation.case_forms import csv_head, csv_rows, table_lines


@dataclass(frozen=True)
class RowsForm(Form):
    """A form of a case a line, of which `encode` makes the lines. head: what stands before them."""

    head: Callable[[dict[str, Any]], bytes]


JSON_TABLE = Form(JSON_FORM.media_type, 25, "cases.json", JSON_FORM.encode)
LINES_TABLE = RowsForm("application/jsonl", 50, "cases.jsonl", table_lines, lambda _: b"")
CSV_TABLE = RowsForm("text/csv", 25, "cases.csv", csv_rows, csv_head)
BINARY_TABLE = Form(ARRAYS_FORM.media_type, 8, "cases.npz", ARRAYS_FORM.encode)
TABLE_FORMS = (JSON_TABLE, LINES_TABLE, CSV_TABLE, BINARY_TABLE)

# What browsers, which choose no Accept of their own, may write into the address.
FORM_OF_WORD = {"json": JSON_TABLE, "jsonl": LINES_TABLE, "csv": CSV_TABLE, "npz": BINARY_TABLE}

# In JSON: whether a limit holds, and what is said of a failed case beside its words.
_BYTES_A_VERDICT = 12
_BYTES_A_FAILURE = 50
# The text of an archive takes four bytes a character.
_TEXT_FACTORS = {JSON_TABLE: 1, BINARY_TABLE: 4}

_ADVICE = f"ask for {LINES_TABLE.media_type} or {CSV_TABLE.media_type}, which come piece by piece."


def table_in(form: Form, store: StudyStore, extent: Extent, most_bytes: int) -> Iterator[bytes]:
    """The table in one of its forms, piece by piece; of one made as a whole there is one.

    Raises TooCostly if it would pass a limit that holds for those made as a whole, UnknownStudy and StoreBusy.
    """
    if isinstance(form, RowsForm):
        yield form.head(_shown(extent, joined(extent, [])))
        for page in pages(store, extent):
            yield form.encode(_shown(extent, page))
        return
    check_size(_estimate(form, extent), most_bytes, _ADVICE)
    body = form.encode(_shown(extent, whole_table(store, extent)))
    check_size(len(body), most_bytes, _ADVICE)
    yield body


def _estimate(form: Form, extent: Extent) -> int:
    """Bytes of a table at most, but for the names of its columns."""
    columns = extent.study.columns
    numbers = 1 + len(columns.numbers) + 2 * len(columns.results) + 2 * len(columns.limits)
    text = extent.cases * len(columns.limits) * _BYTES_A_VERDICT + extent.failed * _BYTES_A_FAILURE + extent.text_bytes
    return extent.cases * numbers * form.bytes_a_number + _TEXT_FACTORS[form] * text


def _shown(extent: Extent, table: Table) -> dict[str, Any]:
    """Cases column by column, as the forms take them."""
    columns = columns_shown(extent.study.columns, table.numbers, table.evaluations)
    return {"study_id": extent.study.study_id, "state": extent.study.state, "case": table.case, **columns}
