"""The core against every published figure, to its printed precision, and against ten-digit values to 1e-9.

`tests/core/reference/published.json` holds the figures with their sources. Where a printed figure is itself
off (a slip in the last place, or a coarse method behind it) the independent value decides and the printed
figure is shown to be off.
"""

from __future__ import annotations

import pytest

from tests.core.reference.measures import MEASURES, solution_of
from tests.core.reference.published import Quantity, published_quantities

TEN_DIGITS = 1e-9

POTENTIALS = {"potential", "mean", "difference"}


def _of(*measures: str) -> list[Quantity]:
    return [quantity for quantity in published_quantities() if quantity.how in measures]


def scale_of(quantity: Quantity) -> float:
    """What 1e-9 refers to: the span of the data for a potential where there is one, otherwise the value
    itself.
    """
    assert quantity.value is not None
    if quantity.how in POTENTIALS:
        return max(solution_of(quantity).span, abs(quantity.value))
    return abs(quantity.value)


EVERYTHING = [quantity for quantity in published_quantities() if quantity.value is not None]


@pytest.mark.parametrize("quantity", EVERYTHING, ids=str)
def test_published_figure_and_ten_digit_value(quantity: Quantity) -> None:
    assert quantity.value is not None
    found = MEASURES[quantity.how](quantity)
    if quantity.how == "overshoot":
        # A sum of N terms overshoots by (2 / pi) Si(pi) - 1 only in the limit; the rest falls like 1 / N^2.
        assert found == pytest.approx(quantity.value, abs=1e-6)
        return
    assert found == pytest.approx(quantity.value, rel=0, abs=TEN_DIGITS * scale_of(quantity))
    if quantity.printed is not None:
        off = abs(found - quantity.printed.value)
        # Printed agrees: within what its rounding allows. Otherwise the printed figure is off by more than
        # that.
        assert (off <= quantity.printed.tolerance) is quantity.printed.agrees, quantity.source


@pytest.mark.parametrize("quantity", _of("below"), ids=str)
def test_nothing_is_left_at_ten_widths(quantity: Quantity) -> None:
    assert abs(MEASURES["below"](quantity)) < quantity.details["limit"]


def test_every_case_has_its_source_and_what_is_off_is_told() -> None:
    quantities = published_quantities()
    assert len(quantities) == 230
    assert all(quantity.source for quantity in quantities)
    assert {quantity.case_id for quantity in quantities if quantity.printed and not quantity.printed.agrees} == {
        "C02-column-film",
        "C05-roots-cot",
        "P01-torsion-constant",
    }
