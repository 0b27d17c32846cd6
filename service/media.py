"""The forms of an answer, as the client accepts: JSON, the same with its arrays in binary, and forms of single calls.

The binary form is a ZIP archive of .npy arrays, which numpy.load opens as it is. Its entry `answer` is the
JSON text of the answer in which the name of an entry stands in place of each array.
"""

from __future__ import annotations

import io
import zipfile
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic_core import to_json

from service.refusals import NotAcceptable

JSON = "application/json"
ARRAYS = "application/vnd.stillfield.npz"

# The same bytes for the same answer: the archive carries this in place of the time it was made.
_NO_TIME = (1980, 1, 1, 0, 0, 0)


def check_accepts_json(accept: str | None) -> None:
    """Raise NotAcceptable when the client takes no JSON, for answers that have no other form."""
    if accept and _quality(accept, JSON) <= 0:
        raise NotAcceptable(f"This answer is {JSON}; name it in Accept, or leave the header out.")


def _quality(accept: str, media_type: str) -> float:
    """The weight of a media type in an Accept header (RFC 9110, section 12.5.1): the most specific range
    decides.
    """
    best = (-1, 0.0)
    main = media_type.partition("/")[0]
    for entry in accept.split(","):
        media_range, *parameters = (part.strip().lower() for part in entry.split(";"))
        specificity = {media_type: 2, f"{main}/*": 1, "*/*": 0}.get(media_range)
        if specificity is None:
            continue
        weight = 1.0
        for parameter in parameters:
            name, _, value = parameter.partition("=")
            if name == "q":
                try:
                    weight = float(value)
                except ValueError:
                    weight = 0.0
        best = max(best, (specificity, weight))
    return best[1]


def _json(answer: dict[str, Any]) -> bytes:
    return to_json(_map_arrays(answer, lambda _, array: array.tolist()), inf_nan_mode="null")


def _archive(answer: dict[str, Any]) -> bytes:
    arrays: dict[str, NDArray[Any]] = {}

    def keep(name: str, array: NDArray[Any]) -> str:
        arrays[name] = array
        return name

    text = to_json(_map_arrays(answer, keep), inf_nan_mode="null").decode()
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_STORED) as archive:
        for name, array in {"answer": np.array(text), **arrays}.items():
            with archive.open(zipfile.ZipInfo(f"{name}.npy", _NO_TIME), "w", force_zip64=True) as entry:
                np.lib.format.write_array(entry, np.asarray(array, order="C"), allow_pickle=False)
    return buffer.getvalue()


def _map_arrays(value: Any, change: Any, name: str = "") -> Any:
    """A copy of nested objects and lists with every array changed; `change` gets its name, such as
    grids_0_potential.
    """
    if isinstance(value, np.ndarray):
        return change(name, value)
    if isinstance(value, dict):
        return {key: _map_arrays(entry, change, f"{name}_{key}" if name else str(key)) for key, entry in value.items()}
    if isinstance(value, list):
        return [_map_arrays(entry, change, f"{name}_{index}") for index, entry in enumerate(value)]
    return value


@dataclass(frozen=True)
class Form:
    """One form of an answer. bytes_a_number: what a double takes at most.

    encode: the answer as bytes. Arrays stand in it as numpy arrays; what is not finite in them becomes null, or stays
    NaN in binary.
    """

    media_type: str
    bytes_a_number: int
    file_name: str
    encode: Callable[[dict[str, Any]], bytes]


# -1.7976931348623157e+308 and a comma
JSON_FORM = Form(JSON, 25, "answer.json", _json)
ARRAYS_FORM = Form(ARRAYS, 8, "answer.npz", _archive)

# What every call can answer in, the form of a client that does not mind first.
FORMS = (JSON_FORM, ARRAYS_FORM)


def choose_form(accept: str | None, forms: Sequence[Form] = FORMS) -> Form:
    """The form the client likes best, the first of those it likes as much. Raises NotAcceptable."""
    quality = [1.0 if not accept else _quality(accept, form.media_type) for form in forms]
    if max(quality) <= 0:
        names = ", ".join(form.media_type for form in forms[:-1])
        raise NotAcceptable(
            f"Answers are {names} or {forms[-1].media_type}; name one of them in Accept, or leave it out."
        )
    return forms[quality.index(max(quality))]
