"""Tables of cases: what their columns are, and the columns filled, while a client waits and in studies alike."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.analysis.limits import Limit, bounds_of, margins, surely_held, surely_passed
from service.models import limits as models
from service.translation.analysis import Prepared
from service.translation.limits import limit_in_words


@dataclass(frozen=True)
class Column:
    """A number or a result."""

    name: str
    unit: str


@dataclass(frozen=True)
class LimitColumn:
    """A limit that each case is held against.

    name: its own, if it has one. limit: in the unit of its result. unit_of_margins: of differences of the result.
    """

    name: str | None
    limit: Limit
    unit_of_margins: str


@dataclass(frozen=True)
class Columns:
    """What a table of cases consists of."""

    numbers: tuple[Column, ...]
    results: tuple[Column, ...]
    limits: tuple[LimitColumn, ...] = ()

    @property
    def bytes_a_case(self) -> int:
        """What a case takes: its numbers, and a value and a bound of each result, which tell what limits say."""
        return 8 * (len(self.numbers) + 2 * len(self.results))


def columns_of(
    numbers: Sequence[tuple[str, str]], prepared: Prepared, asked: Sequence[models.Limit], limits: Sequence[Limit]
) -> Columns:
    """The columns of a table. numbers: their names and units. limits: those asked for, in the units of results."""
    infos = prepared.results.infos
    return Columns(
        tuple(Column(name, unit) for name, unit in numbers),
        tuple(Column(info.name, info.measure.unit) for info in infos),
        tuple(
            LimitColumn(one.name, limit, infos[limit.result].measure.step.unit)
            for one, limit in zip(asked, limits, strict=True)
        ),
    )


def columns_shown(columns: Columns, numbers: FloatArray, found: Evaluations) -> dict[str, Any]:
    """The table column by column. numbers: shape (n_cases, n_numbers)."""
    return {
        "numbers": [
            {"name": column.name, "unit": column.unit, "values": numbers[:, index]}
            for index, column in enumerate(columns.numbers)
        ],
        "columns": [
            {
                "name": column.name,
                "unit": column.unit,
                "values": found.values[:, index],
                "error_bounds": found.bounds[:, index],
            }
            for index, column in enumerate(columns.results)
        ],
        "limits": _limits_shown(columns, found),
        "failures": failures_shown(found.failures),
    }


def failures_shown(failures: Mapping[int, Failure]) -> list[dict[str, Any]]:
    """Failed cases in their order."""
    return [
        {"case": case, "code": failure.code, "message": failure.message} for case, failure in sorted(failures.items())
    ]


def _limits_shown(columns: Columns, found: Evaluations) -> list[dict[str, Any]]:
    limits = [column.limit for column in columns.limits]
    margin, bound = margins(limits, found.values), bounds_of(limits, found.bounds)
    held = np.full(margin.shape, "undecided", dtype=object)
    held[surely_held(margin, bound)] = "yes"
    held[surely_passed(margin, bound)] = "no"
    held[np.isnan(margin)] = None
    return [
        {
            **limit_in_words(column.name, columns.results[column.limit.result].name, column.limit),
            "unit_of_margins": column.unit_of_margins,
            "margins": margin[:, index],
            "error_bounds": bound[:, index],
            "held": held[:, index].tolist(),
        }
        for index, column in enumerate(columns.limits)
    ]
