"""Answers of studies at rest: the binary form of an answer, and back.

In it each array is an entry of an archive, so that a large table takes eight bytes a number and keeps all its digits.
"""

from __future__ import annotations

import io
import json
from typing import Any

import numpy as np

from service.media import ARRAYS_FORM

_ANSWER = "answer"


def pack_answer(answer: dict[str, Any]) -> bytes:
    """An answer as bytes, with its arrays in binary."""
    return ARRAYS_FORM.encode(answer)


def unpack_answer(content: bytes) -> dict[str, Any]:
    """The answer that was packed, with its arrays."""
    with np.load(io.BytesIO(content), allow_pickle=False) as archive:
        arrays = {name: archive[name] for name in archive.files}
    answer: dict[str, Any] = _with_arrays(json.loads(str(arrays.pop(_ANSWER))), arrays, "")
    return answer


def _with_arrays(value: Any, arrays: dict[str, Any], name: str) -> Any:
    """The same with an array wherever its own name stands in its place."""
    if isinstance(value, dict):
        return {key: _with_arrays(entry, arrays, f"{name}_{key}" if name else str(key)) for key, entry in value.items()}
    if isinstance(value, list):
        return [_with_arrays(entry, arrays, f"{name}_{index}") for index, entry in enumerate(value)]
    return arrays[name] if value == name and name in arrays else value
