"""What the validation library found, as sentences about fields with paths in the client's own document."""

from __future__ import annotations

import difflib
import re
from collections.abc import Sequence
from functools import lru_cache
from typing import Any

from service.models.base import Model
from service.refusals import Issue, Path

# More mistakes than this are not told at once.
MOST_ISSUES = 100

# Sentences by the library's own type of error; {…} are filled from its context.
_SENTENCES = {
    "missing": "This field is required.",
    "model_type": "An object is wanted here.",
    "model_attributes_type": "An object is wanted here.",
    "dict_type": "An object is wanted here.",
    "list_type": "A list is wanted here.",
    "string_type": "A text is wanted here.",
    "bool_type": "true or false is wanted here.",
    "int_type": "A whole number is wanted here.",
    "int_from_float": "A whole number is wanted here.",
    "int_parsing_size": "The number is too large.",
    "float_type": "A number is wanted here.",
    "finite_number": "The number has to be finite.",
    "literal_error": "One of {expected} is wanted here.",
    "too_short": "At least {min_length} entries are wanted here; there are {actual_length}.",
    "too_long": "At most {max_length} entries are allowed here.",
    "string_too_short": "The text has to have at least {min_length} characters.",
    "string_too_long": "The text has to have at most {max_length} characters.",
    "string_pattern_mismatch": "The text has to match {pattern}.",
    "string_unicode": "The text is no Unicode.",
    "greater_than_equal": "The number has to be at least {ge}.",
    "less_than_equal": "The number has to be at most {le}.",
    "greater_than": "The number has to be greater than {gt}.",
    "less_than": "The number has to be less than {lt}.",
    "union_tag_not_found": "The field {discriminator} is required.",
    "union_tag_invalid": "One of {expected_tags} is wanted here.",
}


def issues_of(errors: Sequence[Any], body: Any) -> tuple[Issue, ...]:
    """One issue for each error of the validation library, in its order, without repetitions; the first MOST_ISSUES."""
    first = errors[:MOST_ISSUES]
    issues = (Issue(_path(error, body), _sentence(error, body), str(error["type"])) for error in first)
    return tuple(dict.fromkeys(issues))


def _path(error: Any, body: Any) -> Path:
    """Where the field is in the client's document: the library's path without the names of union branches."""
    path: list[str | int] = []
    here: Any = body
    parts = error["loc"][1:]  # the first says that it is about the body and not about the address
    for index, part in enumerate(parts):
        is_key = isinstance(here, dict) and part in here
        if is_key or (isinstance(here, list) and isinstance(part, int) and part < len(here)):
            here = here[part]
            path.append(part)
        elif index == len(parts) - 1 and error["type"] == "missing":
            path.append(part)
    if error["type"] in ("union_tag_invalid", "union_tag_not_found"):
        path.append(error["ctx"]["discriminator"].strip("'"))
    return tuple(path)


# What is said of one thing, where the sentence was made for several.
_OF_ONE = (
    (re.compile(r"\b1 entries are\b"), "1 entry is"),
    (re.compile(r"\bthere are 1\b"), "there is 1"),
    (re.compile(r"\b1 entries\b"), "1 entry"),
    (re.compile(r"\b1 characters\b"), "1 character"),
)


def _of_one(sentence: str) -> str:
    for several, one in _OF_ONE:
        sentence = several.sub(one, sentence)
    return sentence


def _sentence(error: Any, body: Any) -> str:
    kind = error["type"]
    if kind == "extra_forbidden":
        return _unknown_key(str(error["loc"][-1]))
    if kind in _SENTENCES:
        words = {name: str(value).strip("'") if name == "discriminator" else value
                 for name, value in error.get("ctx", {}).items()}  # fmt: skip
        return _of_one(_SENTENCES[kind].format(**words).replace("'", '"'))
    return str(error["msg"])


def _unknown_key(key: str) -> str:
    known = _known_keys()
    close = [] if key in known else difflib.get_close_matches(key, known, n=1)
    if close:
        return f'This key is not known here; the nearest one that is known is "{close[0]}".'
    return "This key is not known here; leave it out."


@lru_cache(maxsize=1)
def _known_keys() -> tuple[str, ...]:
    """All keys of all models, for guesses at what was meant."""
    keys: set[str] = set()
    models = [Model]
    while models:
        model = models.pop()
        models.extend(model.__subclasses__())
        keys.update(field.alias or name for name, field in model.model_fields.items())
    return tuple(sorted(keys))
