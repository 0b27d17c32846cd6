"""The cases a client asks for, as rows of numbers in their declared units."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from service.analysis.designs import count_of_combinations, every_combination, filling
from service.analysis.evaluations import FloatArray
from service.models import cases as models
from service.refusals import Path, TooCostly
from service.settings import Settings
from service.translation.collector import UNREAD, Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo
from service.translation.readings import ReadingsError, number_of, rows_of_csv

_NONE = np.zeros((0, 0))

# Faults of a table that are told at once.
MOST_FAULTS = 20


def read_cases(
    collector: Collector, table: models.CaseTable, numbers: Sequence[NumberInfo], settings: Settings
) -> FloatArray:
    """The cases, shape (n_cases, n_numbers). Notes what is at fault. Raises TooCostly for more than a study takes."""
    path: Path = ("cases",)
    if _note_lengths(collector, table, len(numbers)):
        return _NONE
    if isinstance(table, models.ListOfCases):
        _check_count(len(table.rows), settings)
        return np.array(
            [
                [
                    read_measured(collector, info.measure, value, (*path, "rows", index, column))
                    for column, (value, info) in enumerate(zip(row, numbers, strict=True))
                ]
                for index, row in enumerate(table.rows)
            ]
        )
    if isinstance(table, models.CsvOfCases):
        return _of_csv(collector, table.csv, numbers, settings)
    if isinstance(table, models.GridOfCases):
        counts = [len(values) if isinstance(values, list) else values.count for values in table.values]
        _check_count(count_of_combinations(counts), settings)
        return every_combination(
            [
                _values(collector, values, info, (*path, "values", index))
                for index, (values, info) in enumerate(zip(table.values, numbers, strict=True))
            ]
        )
    _check_count(table.count, settings)
    low, high = (
        np.array(
            [
                read_measured(collector, info.measure, value, (*path, side, index))
                for index, (value, info) in enumerate(zip(getattr(table, side), numbers, strict=True))
            ]
        )
        for side in ("low", "high")
    )
    for index in np.flatnonzero(low > high):
        collector.add((*path, "high", int(index)), "`high` has to be at least `low`.", "order")
    return filling(table.method, table.count, low, high, table.seed)


def _note_lengths(collector: Collector, table: models.CaseTable, count: int) -> bool:
    """Note lists that have no value for each number; whether there are any."""
    lists: list[tuple[Path, int]] = []
    if isinstance(table, models.ListOfCases):
        lists = [(("rows", index), len(row)) for index, row in enumerate(table.rows)]
    elif isinstance(table, models.GridOfCases):
        lists = [(("values",), len(table.values))]
    elif isinstance(table, models.DesignOfCases):
        lists = [(("low",), len(table.low)), (("high",), len(table.high))]
    wrong = [(place, length) for place, length in lists if length != count]
    for place, length in wrong[:MOST_FAULTS]:
        detail = f"The list has {length} {'value' if length == 1 else 'values'} and needs one for each of the numbers"
        collector.add(
            ("cases", *place), f"{detail}, of which there {'is' if count == 1 else 'are'} {count}.", "columns"
        )
    return bool(wrong)


def _check_count(count: int, settings: Settings) -> None:
    if count > settings.study_cases:
        raise TooCostly(
            f"The table has {count} cases; at most {settings.study_cases} are computed, also in a study.",
            count,
            settings.study_cases,
        )


def _values(
    collector: Collector, values: list[float | str] | models.EvenValues, info: NumberInfo, path: Path
) -> FloatArray:
    if isinstance(values, list):
        read = [read_measured(collector, info.measure, value, (*path, index)) for index, value in enumerate(values)]
        return np.array(read)
    first = read_measured(collector, info.measure, values.from_, (*path, "from"))
    last = read_measured(collector, info.measure, values.to, (*path, "to"))
    return np.linspace(first, last, values.count)


def _of_csv(collector: Collector, text: str, numbers: Sequence[NumberInfo], settings: Settings) -> FloatArray:
    path: Path = ("cases", "csv")
    try:
        rows, lines, decimal_comma = rows_of_csv(text)
    except ReadingsError as error:
        collector.add(path, str(error), "csv")
        return _NONE
    names = [entry.strip() for entry in rows[0]] if rows else []
    wanted = [info.name for info in numbers]
    if sorted(names) != sorted(wanted):
        listed = ", ".join(f'"{name}"' for name in wanted)
        collector.add(path, f"The first row has to hold the names of all numbers, each once: {listed}.", "columns")
        return _NONE
    if len(rows) < 2:
        collector.add(path, "There is no case below the names.", "csv")
        return _NONE
    _check_count(len(rows) - 1, settings)
    order = [names.index(name) for name in wanted]
    faults = 0
    cases = np.full((len(rows) - 1, len(wanted)), UNREAD)
    for index, (row, line) in enumerate(zip(rows[1:], lines[1:], strict=True)):
        values = [number_of(entry.strip(), decimal_comma) for entry in row]
        if len(row) != len(names):
            fault = f"Line {line} of the text has {len(row)} of the {len(names)} entries that the first row has."
        elif None in values:
            fault = f'Line {line} of the text: "{names[values.index(None)]}" has to be a bare number.'
        else:
            cases[index] = [values[column] for column in order]
            continue
        collector.add(path, fault, "csv")
        faults += 1
        if faults == MOST_FAULTS:
            break
    return cases
