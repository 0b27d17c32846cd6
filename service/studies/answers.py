"""Answers of studies at rest: the binary form of an answer, and back.

In it each array is an entry of an archive, so that a large table takes eight bytes a number and keeps all its digits.
What is sent of it has a limit.
"""

from __future__ import annotations

import io
import json
from typing import Any

import numpy as np

from service.media import ARRAYS_FORM, Form
from service.refusals import TooCostly

_ANSWER = "answer"

_ADVICE = "the table of cases at the address `results` comes piece by piece as JSON lines or CSV."


def pack_answer(answer: dict[str, Any]) -> bytes:
    """An answer as bytes, with its arrays in binary."""
    return ARRAYS_FORM.encode(answer)


def unpack_answer(content: bytes) -> dict[str, Any]:
    """The answer that was packed, with its arrays."""
    with np.load(io.BytesIO(content), allow_pickle=False) as archive:
        arrays = {name: archive[name] for name in archive.files}
    answer: dict[str, Any] = _with_arrays(json.loads(str(arrays.pop(_ANSWER))), arrays, "")
    return answer


def answer_in(form: Form, content: bytes, most_bytes: int) -> bytes:
    """A packed answer in one of its forms. Raises TooCostly if that would pass the limit."""
    if form is ARRAYS_FORM:
        check_size(len(content), most_bytes, _ADVICE)
        return content
    answer = unpack_answer(content)
    check_size(form.bytes_a_number * _numbers_in(answer), most_bytes, _ADVICE)
    body = form.encode(answer)
    check_size(len(body), most_bytes, _ADVICE)
    return body


def check_size(size: int, most: int, advice: str) -> None:
    """Raise TooCostly if an answer of some bytes passes the limit. advice: what to do instead."""
    if size > most:
        raise TooCostly(f"The answer takes up to {size} bytes; at most {most} are sent; {advice}", size, most)


def _numbers_in(value: Any) -> int:
    """How many numbers the arrays of an answer have."""
    if isinstance(value, dict):
        return sum(map(_numbers_in, value.values()))
    if isinstance(value, list):
        return sum(map(_numbers_in, value))
    return value.size if isinstance(value, np.ndarray) else 0


def _with_arrays(value: Any, arrays: dict[str, Any], name: str) -> Any:
    """The same with an array wherever its own name stands in its place."""
    if isinstance(value, dict):
        return {key: _with_arrays(entry, arrays, f"{name}_{key}" if name else str(key)) for key, entry in value.items()}
    if isinstance(value, list):
        return [_with_arrays(entry, arrays, f"{name}_{index}") for index, entry in enumerate(value)]
    return arrays[name] if value == name and name in arrays else value
