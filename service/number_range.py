"""Which numbers are read at all.

No quantity of an engineer is as large or as small. Within this range the squares and cubes the solver forms
of lengths, and what unit prefixes add, stay finite numbers and keep all their digits.
"""

LARGEST_NUMBER = 1e60
SMALLEST_NUMBER = 1e-60


def is_readable(value: float) -> bool:
    """Whether a number is zero or within the range; false for NaN and infinity."""
    return value == 0 or SMALLEST_NUMBER <= abs(value) <= LARGEST_NUMBER


RANGE_IN_WORDS = f"zero or between {SMALLEST_NUMBER:g} and {LARGEST_NUMBER:g} in size"
