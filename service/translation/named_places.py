"""Names of what a sentence about a case points to."""

from __future__ import annotations

import re
from collections.abc import Mapping
from functools import partial
from typing import Any

_POINTER = re.compile(r"/problem(?:/[^\s:]*)?(?=:)")
_PATCH = re.compile(r"\bPatch (\d+)\b")


def with_names(message: str, document: Mapping[str, Any]) -> str:
    """A sentence about a case with the names that its pads have in the request.

    document: the request. "Patch 0" behind a pointer to a map becomes 'Patch 0 ("heater")' if that has a name.
    """
    for pointer in _POINTER.findall(message):
        patches = _patches_at(document, pointer)
        if patches:
            return _PATCH.sub(partial(_named, patches), message)
    return message


def _patches_at(document: Mapping[str, Any], pointer: str) -> list[Any]:
    """The patches of the map that a pointer leads to or into."""
    here: Any = document
    for part in pointer[1:].split("/"):
        if isinstance(here, Mapping) and "patches" in here:
            break
        key = int(part) if isinstance(here, list) and part.isdigit() else part
        try:
            here = here[key]
        except (KeyError, IndexError, TypeError):
            break
    return here["patches"] if isinstance(here, Mapping) and isinstance(here.get("patches"), list) else []


def _named(patches: list[Any], found: re.Match[str]) -> str:
    index = int(found[1])
    name = patches[index].get("name") if index < len(patches) else None
    return found[0] if name is None else f'{found[0]} ("{name}")'
