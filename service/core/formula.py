"""An expression in the two coordinates of a face: read, checked, and evaluated on numbers and on Taylor jets.

The grammar is that of ordinary expressions: numbers, the two coordinates, pi and e, + - * / and powers (`^` or `**`),
and the functions of FUNCTIONS. It is parsed by the standard library into a tree of which only these nodes are taken;
nothing of it is ever run.
"""

from __future__ import annotations

import ast
import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.errors import NotPhysical
from service.core.jets import Jet

FloatArray = NDArray[np.float64]

# Bounds of an expression: characters, nodes of its tree, levels of nesting, and the size of a power's exponent.
LONGEST, MOST_NODES, DEEPEST, LARGEST_EXPONENT = 500, 200, 40, 64.0

# A number in decimal; the parser would also take other bases and underscores.
DECIMAL = re.compile(r"([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?")

CONSTANTS: dict[str, float] = {"pi": math.pi, "e": math.e}
COORDINATES = ("x", "y", "z")


@dataclass(frozen=True)
class Function:
    """A function of one argument: on numbers and on jets."""

    of_numbers: Callable[[FloatArray], FloatArray]
    of_jet: Callable[[Jet], Jet]


def _log10(jet: Jet) -> Jet:
    return jet.log() * Jet.constant(1 / math.log(10), jet.order)


def _acos(jet: Jet) -> Jet:
    return Jet.constant(math.pi / 2, jet.order) - jet.asin()


FUNCTIONS: dict[str, Function] = {
    "sin": Function(np.sin, Jet.sin),
    "cos": Function(np.cos, Jet.cos),
    "tan": Function(np.tan, lambda jet: jet.sin() / jet.cos()),
    "asin": Function(np.arcsin, Jet.asin),
    "acos": Function(np.arccos, _acos),
    "atan": Function(np.arctan, Jet.atan),
    "sinh": Function(np.sinh, Jet.sinh),
    "cosh": Function(np.cosh, Jet.cosh),
    "tanh": Function(np.tanh, Jet.tanh),
    "exp": Function(np.exp, Jet.exp),
    "log": Function(np.log, Jet.log),
    "ln": Function(np.log, Jet.log),
    "log10": Function(np.log10, _log10),
    "sqrt": Function(np.sqrt, lambda jet: jet.real_power(0.5)),
    "abs": Function(np.abs, Jet.abs),
}
SEVERAL = ("min", "max")

# Arguments at which the slope of a function is infinite though its value is not.
STEEP_AT: dict[str, tuple[float, ...]] = {"sqrt": (0.0,), "asin": (-1.0, 1.0), "acos": (-1.0, 1.0)}

Numbers = Mapping[str, FloatArray]
Jets = Mapping[str, Jet]


@dataclass(frozen=True)
class Steep:
    """A function whose slope is infinite where its argument has one of some values, and where it is in the text."""

    name: str
    character: int
    values: tuple[float, ...]


@dataclass(frozen=True)
class Node:
    """A part of an expression. of_numbers, of_jets: its value from those of the coordinates.

    names: the coordinates it depends on. switch: of abs, min and max the part whose change of sign is a kink.
    children: the parts it is made of. steep: where its slope over its only part is infinite, if anywhere.
    """

    of_numbers: Callable[[Numbers], FloatArray]
    of_jets: Callable[[Jets, int], Jet]
    names: frozenset[str]
    children: tuple[Node, ...] = ()
    switch: Node | None = None
    steep: Steep | None = None

    def switches(self) -> list[Node]:
        """All parts whose change of sign is a kink."""
        own = [] if self.switch is None else [self.switch]
        return own + [switch for child in self.children for switch in child.switches()]

    def steep_parts(self) -> list[tuple[Steep, Node]]:
        """All parts that have an infinite slope somewhere, and what that is a slope over."""
        own = [] if self.steep is None else [(self.steep, self.children[0])]
        return own + [found for child in self.children for found in child.steep_parts()]


@dataclass(frozen=True)
class Formula:
    """A checked expression in two coordinates."""

    text: str
    names: tuple[str, str]
    root: Node

    def at(self, first: FloatArray, second: FloatArray) -> FloatArray:
        """Values on the grid of two axes, shape (first.size, second.size); not finite where the formula is not."""
        with np.errstate(all="ignore"):
            values = self.root.of_numbers({self.names[0]: first[:, None], self.names[1]: second[None, :]})
        return np.array(np.broadcast_to(values, (first.size, second.size)), dtype=float)


def read(text: str, names: tuple[str, str]) -> Formula:
    """The formula that a text is, in two of the coordinates x, y, z.

    Raises NotPhysical with one sentence, which says at which character, for everything else than an expression.
    """
    if len(text) > LONGEST:
        raise NotPhysical(f"The expression has {len(text)} characters; at most {LONGEST} are read.")
    if not text.isascii():
        place = next(index for index, letter in enumerate(text) if not letter.isascii())
        raise NotPhysical(f"Character {place + 1} of the expression is none that is used in a formula.")
    if "#" in text:
        # The parser would take what follows for a comment and pass over it.
        raise NotPhysical(f"Character {text.index('#') + 1} of the expression is none that is used in a formula.")
    try:
        tree = ast.parse(text.strip().replace("^", "**"), mode="eval")
    except (SyntaxError, ValueError, RecursionError, MemoryError) as error:
        column = getattr(error, "offset", None)
        where = f" near character {_place(text, column - 1)}" if column else ""
        raise NotPhysical(f"The expression cannot be read{where}; write for example 30 + 600*exp(-(x/8)^2).") from None
    reader = _Reader(text, names)
    return Formula(text, names, reader.node(tree.body, 0))


def _place(text: str, column: int) -> int:
    """Character of the text, counted from 1, that stands at a column after each ^ became two characters."""
    indent = len(text) - len(text.lstrip())
    seen = 0
    for index, letter in enumerate(text[indent:]):
        if seen >= column:
            return indent + index + 1
        seen += 2 if letter == "^" else 1
    return max(len(text.rstrip()), 1)


class _Reader:
    """Turns the nodes of a tree into parts of a formula, and refuses the first that has no place in one."""

    def __init__(self, text: str, names: tuple[str, str]) -> None:
        self.text = text
        self.names = names
        self.count = 0

    def node(self, tree: ast.expr, depth: int) -> Node:
        self.count += 1
        if depth > DEEPEST or self.count > MOST_NODES:
            raise NotPhysical(f"The expression has more than {MOST_NODES} parts or {DEEPEST} levels of nesting.")
        match tree:
            case ast.Constant(value=int() | float() as value) if not isinstance(value, bool):
                return self._number(tree, value)
            case ast.Name(id=name):
                return self._name(tree, name)
            case ast.UnaryOp(op=ast.USub() | ast.UAdd() as sign, operand=operand):
                return _signed(self.node(operand, depth + 1), negative=isinstance(sign, ast.USub))
            case ast.BinOp(op=ast.Pow(), left=base, right=exponent):
                return self._power(exponent, self.node(base, depth + 1), self.node(exponent, depth + 1))
            case ast.BinOp(op=ast.Add() | ast.Sub() | ast.Mult() | ast.Div() as sign, left=left, right=right):
                return _joined(type(sign), self.node(left, depth + 1), self.node(right, depth + 1))
            case ast.Call(func=ast.Name(id=name), args=arguments, keywords=[]):
                return self._call(tree, name, [self.node(argument, depth + 1) for argument in arguments])
        raise NotPhysical(
            f"Character {self._where(tree)} of the expression begins something that has no place in a formula; use "
            "numbers, coordinates, + - * / ^, parentheses and functions."
        )

    def _where(self, tree: ast.expr) -> int:
        return _place(self.text, tree.col_offset)

    def _number(self, tree: ast.expr, value: float) -> Node:
        written = ast.get_source_segment(self.text.strip().replace("^", "**"), tree)
        if written is None or not DECIMAL.fullmatch(written):
            raise NotPhysical(
                f"The number at character {self._where(tree)} of the expression is not written in decimal; write for "
                "example 1000, 0.5 or 1.5e3."
            )
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            raise NotPhysical(f"The number at character {self._where(tree)} of the expression is too large.")
        return _constant(number)

    def _name(self, tree: ast.expr, name: str) -> Node:
        if name in CONSTANTS:
            return _constant(CONSTANTS[name])
        if name in self.names:
            return Node(lambda numbers: numbers[name], lambda jets, _: jets[name], frozenset({name}))
        where = f"at character {self._where(tree)} of the expression"
        if name in COORDINATES:
            raise NotPhysical(
                f"The face has no extent along {name}, {where}; its coordinates are {self.names[0]} and "
                f"{self.names[1]}."
            )
        if name in FUNCTIONS or name in SEVERAL:
            raise NotPhysical(f"The function {name} {where} needs its argument in parentheses.")
        raise NotPhysical(
            f"The name {name} {where} is not known; the coordinates are {self.names[0]} and {self.names[1]}, the "
            "constants pi and e."
        )

    def _call(self, tree: ast.expr, name: str, arguments: list[Node]) -> Node:
        where = f"at character {self._where(tree)} of the expression"
        if name in SEVERAL:
            if len(arguments) < 2:
                raise NotPhysical(f"The function {name} {where} needs at least two arguments.")
            result = arguments[0]
            for argument in arguments[1:]:
                result = _larger_or_smaller(name == "max", result, argument)
            return result
        function = FUNCTIONS.get(name)
        if function is None:
            known = ", ".join((*FUNCTIONS, *SEVERAL))
            raise NotPhysical(f"The function {name} {where} is not known; there are {known}.")
        if len(arguments) != 1:
            raise NotPhysical(f"The function {name} {where} takes one argument, not {len(arguments)}.")
        (inner,) = arguments
        return Node(
            lambda numbers: function.of_numbers(inner.of_numbers(numbers)),
            lambda jets, order: function.of_jet(inner.of_jets(jets, order)),
            inner.names,
            (inner,),
            inner if name == "abs" else None,
            Steep(name, self._where(tree), STEEP_AT[name]) if name in STEEP_AT else None,
        )

    def _power(self, tree: ast.expr, base: Node, exponent: Node) -> Node:
        if exponent.names:
            return Node(
                lambda numbers: base.of_numbers(numbers) ** exponent.of_numbers(numbers),
                lambda jets, order: (base.of_jets(jets, order).log() * exponent.of_jets(jets, order)).exp(),
                base.names | exponent.names,
                (base, exponent),
            )
        with np.errstate(all="ignore"):
            power = float(exponent.of_numbers({}))
        if not abs(power) <= LARGEST_EXPONENT:
            raise NotPhysical(
                f"The exponent at character {self._where(tree)} of the expression is {power:g}; it has to lie between "
                f"{-LARGEST_EXPONENT:g} and {LARGEST_EXPONENT:g}."
            )

        def of_jets(jets: Jets, order: int) -> Jet:
            jet = base.of_jets(jets, order)
            return jet.whole_power(int(power)) if power.is_integer() else jet.real_power(power)

        steep = Steep("the power", self._where(tree), (0.0,)) if 0.0 < power < 1.0 else None
        return Node(lambda numbers: base.of_numbers(numbers) ** power, of_jets, base.names, (base,), steep=steep)


def _constant(value: float) -> Node:
    number = np.array(value)
    return Node(lambda _: number, lambda _, order: Jet.constant(value, order), frozenset())


def _signed(inner: Node, *, negative: bool) -> Node:
    if not negative:
        return inner
    return Node(
        lambda numbers: -inner.of_numbers(numbers),
        lambda jets, order: -inner.of_jets(jets, order),
        inner.names,
        (inner,),
    )


def _joined(sign: type[ast.operator], left: Node, right: Node) -> Node:
    """Sum, difference, product or quotient."""

    def of_numbers(numbers: Numbers) -> FloatArray:
        a, b = left.of_numbers(numbers), right.of_numbers(numbers)
        if sign is ast.Add:
            return a + b
        if sign is ast.Sub:
            return a - b
        return a * b if sign is ast.Mult else a / b

    def of_jets(jets: Jets, order: int) -> Jet:
        a, b = left.of_jets(jets, order), right.of_jets(jets, order)
        if sign is ast.Add:
            return a + b
        if sign is ast.Sub:
            return a - b
        return a * b if sign is ast.Mult else a / b

    return Node(of_numbers, of_jets, left.names | right.names, (left, right))


def _larger_or_smaller(larger: bool, left: Node, right: Node) -> Node:
    def of_numbers(numbers: Numbers) -> FloatArray:
        a, b = left.of_numbers(numbers), right.of_numbers(numbers)
        return np.maximum(a, b) if larger else np.minimum(a, b)

    def of_jets(jets: Jets, order: int) -> Jet:
        a, b = left.of_jets(jets, order), right.of_jets(jets, order)
        return a.larger(b) if larger else -((-a).larger(-b))

    return Node(of_numbers, of_jets, left.names | right.names, (left, right), _joined(ast.Sub, left, right))
