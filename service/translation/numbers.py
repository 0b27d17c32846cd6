"""Numbers of a request by their pointers, and the request with other values of them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal, TypeVar

import numpy as np
from numpy.typing import NDArray

from service.models.numbers import NumberReference
from service.refusals import Path
from service.translation.collector import Collector
from service.translation.measures import is_coordinate, measure_at, plain_measure, read_measured
from service.translation.result_units import Measure
from service.units import UnitSystem

Way = Literal["at", "shift", "scale"]
Amount = TypeVar("Amount", float, NDArray[np.float64])

_INDEX = re.compile(r"0|[1-9]\d{0,9}")

# Nominal values of numbers that move others.
AS_IT_STANDS = {"shift": 0.0, "scale": 1.0}


@dataclass(frozen=True)
class NumberInfo:
    """A number as questions and answers speak of it. nominal: its value in the request as it stands."""

    name: str
    measure: Measure
    nominal: float


@dataclass(frozen=True)
class Leaf:
    """One value of the request that a number changes. base: what stands there, as a number in the declared unit; None
    for a formula, which is scaled as a whole.
    """

    path: Path
    base: float | None


@dataclass(frozen=True)
class NumberTarget:
    """What a number changes in the request, and how. about: the level from which scaled values are counted."""

    way: Way
    leaves: tuple[Leaf, ...]
    about: float = 0.0

    def value_of(self, leaf: Leaf, here: Any, number: float) -> Any:
        """What stands at a leaf for a value of the number. here: what stands there so far."""
        if leaf.base is None:
            return f"{self.about!r} + {number!r} * (({here}) - {self.about!r})"
        return self.moved(leaf.base, number)

    def moved(self, base: float, number: Amount) -> Amount:
        """What becomes of a value for a value of the number, or for an array of them."""
        if self.way == "at":
            return number
        if self.way == "shift":
            return base + number
        return self.about + number * (base - self.about)


def read_numbers(
    collector: Collector,
    references: Sequence[NumberReference],
    document: Mapping[str, Any],
    units: UnitSystem,
    path: Path = ("numbers",),
) -> tuple[tuple[NumberInfo, ...], tuple[NumberTarget, ...]]:
    """The numbers of a request. Notes each pointer to what is no number, and each name that stands twice.

    document: the request, plain JSON values, with the problem written out. path: where the references stand in it.
    """
    infos, targets = [], []
    seen: set[str] = set()
    moved: dict[Path, str] = {}
    for index, reference in enumerate(references):
        here = (*path, index)
        if reference.name in seen:
            collector.add((*here, "name"), "Another number has this name already.", "name")
        seen.add(reference.name)
        read = read_number(collector, reference, document, units, here)
        if read is None:
            continue
        info, target = read
        for leaf in target.leaves:
            other = moved.setdefault(leaf.path, reference.name)
            if other != reference.name:
                detail = f'The number "{other}" changes {written(leaf.path)} already.'
                collector.add((*here, target.way), detail, "changed-twice")
        infos.append(info)
        targets.append(target)
    return tuple(infos), tuple(targets)


def read_number(
    collector: Collector, reference: NumberReference, document: Mapping[str, Any], units: UnitSystem, path: Path
) -> tuple[NumberInfo, NumberTarget] | None:
    """One number of a request, which stands in it at `path`. None, and noted, where a pointer leads to no number."""
    return _Reading(collector, document, units, path).read(reference)


def written(path: Path) -> str:
    """A path as a JSON pointer."""
    return "".join("/" + str(part).replace("~", "~0").replace("/", "~1") for part in path)


class _Reading:
    """Reads one reference; where it stands in the request is `path`."""

    def __init__(self, collector: Collector, document: Mapping[str, Any], units: UnitSystem, path: Path) -> None:
        self._collector = collector
        self._document = document
        self._units = units
        self._path = path

    def read(self, reference: NumberReference) -> tuple[NumberInfo, NumberTarget] | None:
        noted = len(self._collector.issues)
        way: Way = "at" if reference.at is not None else "shift" if reference.shift is not None else "scale"
        pointers = getattr(reference, way)
        found: list[tuple[Leaf, Measure]] = []
        for index, pointer in enumerate([pointers] if isinstance(pointers, str) else pointers):
            place = (*self._path, way) if isinstance(pointers, str) else (*self._path, way, index)
            found.extend(self._leaves(pointer, way, place))
        if len(self._collector.issues) > noted or not found:
            return None
        measure = found[0][1]
        leaves = tuple(leaf for leaf, _ in found)
        if way != "scale" and any(other != measure for _, other in found):
            detail = "The pointers lead to numbers of different kinds; point to numbers of one kind."
            self._collector.add((*self._path, way), detail, "kind")
            return None
        if way == "at":
            return self._at(reference.name, measure, leaves)
        if way == "shift":
            return NumberInfo(reference.name, measure.step, AS_IT_STANDS[way]), NumberTarget(way, leaves)
        about = 0.0
        if reference.about is not None:
            if any(other != measure for _, other in found):
                detail = "What is scaled about a level has to be of one kind."
                self._collector.add((*self._path, "about"), detail, "kind")
                return None
            about = read_measured(self._collector, measure, reference.about, (*self._path, "about"))
        return NumberInfo(reference.name, plain_measure(), AS_IT_STANDS[way]), NumberTarget(way, leaves, about)

    def _at(self, name: str, measure: Measure, leaves: tuple[Leaf, ...]) -> tuple[NumberInfo, NumberTarget] | None:
        values = {leaf.base for leaf in leaves}
        if len(values) > 1:
            detail = "The pointers lead to different values; use `shift` or `scale`, or make them equal in the request."
            self._collector.add((*self._path, "at"), detail, "different-values")
            return None
        nominal = leaves[0].base
        assert nominal is not None
        return NumberInfo(name, measure, nominal), NumberTarget("at", leaves)

    def _leaves(self, pointer: str, way: Way, place: Path) -> list[tuple[Leaf, Measure]]:
        """The values a pointer leads to, each with what it measures. place: of the pointer in the request."""
        path = resolve(self._collector, self._document, pointer, place)
        if path is None:
            return []
        here = value_at(self._document, path)
        if isinstance(here, dict | list):
            if way != "scale":
                detail = f"{pointer} is no single number; point to one, or use `scale`."
                self._collector.add(place, detail, "no-number")
                return []
            return self._inside(here, path, pointer, place)
        leaf = self._leaf(here, path)
        if leaf is None:
            detail = f"{pointer} is no number that can be varied."
            self._collector.add(place, detail, "no-number")
            return []
        return [leaf]

    def _inside(self, here: Any, path: Path, pointer: str, place: Path) -> list[tuple[Leaf, Measure]]:
        """All data below a pointer to a map, a list of coefficients or a conductivity."""
        is_map = isinstance(here, dict) and "map" in here
        is_scaled = is_map or path[-1] in ("conductivity", "coefficient", "table")
        if not is_scaled:
            detail = f"{pointer} is not a map, a table, a list of coefficients or a conductivity."
            self._collector.add(place, detail, "no-number")
            return []
        if is_map and "csv" in here:
            detail = "Readings given as `csv` cannot be scaled; give them as `table` with its axes."
            self._collector.add(place, detail, "no-number")
            return []
        found = []
        for below, value in _values_below(here, path):
            if is_coordinate(below):
                continue
            leaf = self._leaf(value, below)
            if leaf is not None:
                found.append(leaf)
        return found

    def _leaf(self, value: Any, path: Path) -> tuple[Leaf, Measure] | None:
        """A number that can be varied, or a formula; None for anything else."""
        if path[-1] == "expression" and isinstance(value, str):
            measure = measure_at((*path[:-1], "background"), self._units)
            assert measure is not None
            return Leaf(path, None), measure
        measure = measure_at(path, self._units)
        if measure is None or isinstance(value, bool) or not isinstance(value, int | float | str):
            return None
        if isinstance(value, str) and value in _WORDS:
            return None
        noted = len(self._collector.issues)
        number = read_measured(self._collector, measure, value, path)
        return None if len(self._collector.issues) > noted else (Leaf(path, number), measure)


def resolve(collector: Collector, document: Mapping[str, Any], pointer: str, place: Path) -> Path | None:
    """The path of a pointer into a request; None, and noted, where it leads nowhere.

    place: where the pointer stands.
    """
    path: list[str | int] = []
    here: Any = document
    for token in pointer[1:].split("/"):
        key = token.replace("~1", "/").replace("~0", "~")
        if isinstance(here, list) and _INDEX.fullmatch(key) and int(key) < len(here):
            path.append(int(key))
        elif isinstance(here, dict) and key in here:
            path.append(key)
        else:
            before = written(tuple(path)) or "the request"
            detail = f'There is no "{key[:100]}" in {before}; {_what_is_there(here)}.'
            collector.add(place, detail, "no-such-place")
            return None
        here = here[path[-1]]
    if path[0] not in ("problem", "results"):
        collector.add(place, "Pointers have to begin with /problem or /results.", "no-such-place")
        return None
    return tuple(path)


# Words that stand in place of a coordinate or a size.
_WORDS = {"begin", "end", "low", "middle", "high", "semi-infinite", "infinite"}

_MOST_LISTED = 20


def _what_is_there(here: Any) -> str:
    if isinstance(here, dict):
        keys = list(here)
        return "it has " + ", ".join(keys[:_MOST_LISTED]) + (" and more" if len(keys) > _MOST_LISTED else "")
    if isinstance(here, list):
        return f"it has the entries 0 to {len(here) - 1}" if here else "it is empty"
    return "it is a single value"


def value_at(document: Any, path: Path) -> Any:
    """What stands at a path of a request."""
    for part in path:
        document = document[part]
    return document


def _values_below(here: Any, path: Path) -> Iterator[tuple[Path, Any]]:
    if isinstance(here, dict):
        for key, value in here.items():
            yield from _values_below(value, (*path, key))
    elif isinstance(here, list):
        for index, value in enumerate(here):
            yield from _values_below(value, (*path, index))
    else:
        yield path, here


class Substitution:
    """Makes a request with other values of its numbers. What does not change is shared, not copied."""

    def __init__(self, document: Mapping[str, Any], targets: Sequence[NumberTarget]) -> None:
        self._document = document
        self._changes: dict[Any, Any] = {}
        for number, target in enumerate(targets):
            for leaf in target.leaves:
                branch = self._changes
                for part in leaf.path[:-1]:
                    branch = branch.setdefault(part, {})
                branch[leaf.path[-1]] = (number, target, leaf)

    @property
    def changes_problem(self) -> bool:
        """Whether any number stands in the problem, and not only in what is read off it."""
        return "problem" in self._changes

    def __call__(self, values: Sequence[float]) -> dict[str, Any]:
        """The request for these values of the numbers."""
        changed = _rebuilt(self._document, self._changes, values)
        assert isinstance(changed, dict)
        return changed


def _rebuilt(here: Any, changes: Mapping[Any, Any], values: Sequence[float]) -> Any:
    copy = dict(here) if isinstance(here, Mapping) else list(here)
    for key, change in changes.items():
        if isinstance(change, dict):
            copy[key] = _rebuilt(here[key], change, values)
        else:
            number, target, leaf = change
            copy[key] = target.value_of(leaf, here[key], float(values[number]))
    return copy
