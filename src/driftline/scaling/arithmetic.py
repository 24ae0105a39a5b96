"""A small arithmetic language for the user's own formulas: numbers, names, operators and functions of numpy.

The text is parsed with `ast`, every node of the tree is compared with a short list, and the checked tree is evaluated
node by node with the functions of two tables.  No text is ever executed as Python: an attribute, an import, a
subscript or a string has no meaning here, rather than being forbidden.

The interpreter `asteval`, which comes with lmfit, is not used, for two reasons.  It ends the evaluation of a whole
array when a single exponent exceeds 10^4, so the value at one parameter vector would depend on the others in its
batch; and it holds open streams and cannot be sent to a worker process.  The tests compare with it.
"""

from __future__ import annotations

import ast
import math
import re
import warnings
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from typing import Any

import numpy as np
from numpy.typing import NDArray

from driftline.curves import FloatArray
from driftline.errors import ConfigurationError
from driftline.wording import brief

#: Longest text and deepest nesting of a formula (a sum of n terms is nested n deep): far above what a person writes,
#: and enough to bound the time of parsing and evaluation.
MOST_CHARACTERS, MOST_LEVELS = 500, 50

FUNCTIONS: dict[str, np.ufunc] = {
    name: getattr(np, name)
    for name in (
        "abs", "sign", "sqrt", "cbrt", "exp", "expm1", "log", "log1p", "log2", "log10", "sin", "cos", "tan", "arcsin",
        "arccos", "arctan", "arctan2", "sinh", "cosh", "tanh", "arcsinh", "arccosh", "arctanh", "hypot", "minimum",
        "maximum",
    )
}  # fmt: skip
#: Choice by a comparison; not a ufunc, so it has a branch of its own.
WHERE = "where"
CONSTANTS = {"pi": math.pi}
RESERVED = (*FUNCTIONS, WHERE, *CONSTANTS)

_BINARY: dict[type[ast.operator], np.ufunc] = {
    ast.Add: np.add, ast.Sub: np.subtract, ast.Mult: np.multiply, ast.Div: np.divide, ast.Pow: np.power,
}  # fmt: skip
_UNARY: dict[type[ast.unaryop], np.ufunc] = {ast.UAdd: np.positive, ast.USub: np.negative}
_COMPARE: dict[type[ast.cmpop], np.ufunc] = {ast.Lt: np.less, ast.Gt: np.greater}
_STRANGE = re.compile(r"[^A-Za-z0-9_ .+\-*/(),<>]")
_HINTS = {"^": "; powers are written **", "=": "; give the right-hand side alone", "[": "; nothing has parts to index"}

Values = Mapping[str, FloatArray]


@dataclass(frozen=True)
class Formula:
    """A checked formula; call it with the values of its names. Built by `parse_formula`.

    Parameters
    ----------
    text : str
        As written, with single spaces.
    names : frozenset of str
        Names whose values it needs.
    """

    text: str
    names: frozenset[str]
    _tree: ast.expr = field(repr=False, compare=False)

    def __call__(self, values: Values) -> FloatArray:
        """Value with the usual broadcasting; where it is not defined NaN or infinite, without a warning.

        Parameters
        ----------
        values : mapping of arrays
            One for each of the `names`; others are ignored.
        """
        with np.errstate(all="ignore"):
            return _value(self._tree, values)


def parse_formula(text: str, names: Iterable[str]) -> Formula:
    """The formula in `text`, which may use the `names`, the functions of `FUNCTIONS` and `CONSTANTS`.

    Raises
    ------
    ConfigurationError
        With a sentence part that has the formula as its subject, for example "is empty".

    Examples
    --------
    >>> formula = parse_formula("(W - W_c) * L**(1/nu)", ["W", "L", "W_c", "nu"])
    >>> float(formula({"W": np.array(4.0), "L": np.array(9.0), "W_c": np.array(3.0), "nu": np.array(2.0)}))
    3.0
    """
    known = tuple(names)
    clean = _clean(text)
    tree = _parse(clean)
    _require_shallow(tree)  # first: what follows is recursive
    return Formula(clean, frozenset(_checked(tree, known)), tree)


def _clean(text: str) -> str:
    """The text with single spaces; refused if it is too long or holds a character that arithmetic does not need."""
    if not isinstance(text, str):
        raise ConfigurationError(f"must be text, not {brief(text)}")
    if len(text) > MOST_CHARACTERS:
        raise ConfigurationError(f"has {len(text)} characters; shorten it to at most {MOST_CHARACTERS}")
    clean = re.sub(r"[ \t\r\n]+", " ", text).strip(" ")
    if not clean:
        raise ConfigurationError("is empty; write the scaled variable as arithmetic of W, L and the parameters")
    if strange := _STRANGE.search(clean):
        character = strange.group()
        raise ConfigurationError(
            f"holds the character {character!a}, which has no place in arithmetic{_HINTS.get(character, '')}"
        )
    return clean


def _parse(text: str) -> ast.expr:
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # of things like `1or 2`, which the check refuses anyway
            return ast.parse(text, mode="eval").body
    except (SyntaxError, ValueError, RecursionError, MemoryError) as reason:
        where = f" near column {reason.offset}" if isinstance(reason, SyntaxError) and reason.offset else ""
        raise ConfigurationError(f"is not complete arithmetic{where}; check brackets and operators") from reason


def _require_shallow(tree: ast.expr) -> None:
    level: list[ast.AST] = [tree]
    for _ in range(MOST_LEVELS):
        level = [child for node in level for child in ast.iter_child_nodes(node)]
    if level:
        raise ConfigurationError(f"is nested more than {MOST_LEVELS} deep; simplify it")


def _checked(node: ast.AST, names: tuple[str, ...]) -> Iterator[str]:
    """Names used in the tree; raises for the first node that has no place in arithmetic."""
    for child in _parts(node, names):
        if isinstance(child, str):
            yield child
        else:
            yield from _checked(child, names)
    _require_finite(node)


def _parts(node: ast.AST, names: tuple[str, ...]) -> list[Any]:
    """What a node is made of: nodes below it, or the name it stands for."""
    match node:
        case ast.Constant(value=int() | float()) if not isinstance(node.value, bool):
            return []
        case ast.Name(id=name):
            return _name(name, names)
        case ast.UnaryOp(op=op, operand=operand) if type(op) in _UNARY:
            return [operand]
        case ast.BinOp(left=left, op=op, right=right) if type(op) in _BINARY:
            return [left, right]
        case ast.Compare(left=left, ops=[op], comparators=[right]) if type(op) in _COMPARE:
            return [left, right]
        case ast.Call(func=ast.Name(id=name), args=args, keywords=[]):
            return _arguments(name, args)
    raise ConfigurationError(
        f"holds {_shown(node)}; only numbers, names, + - * / **, single < or >, and functions by their bare names, as "
        "exp(W), are understood"
    )


def _name(name: str, names: tuple[str, ...]) -> list[str]:
    if name in names:
        return [name]
    if name in CONSTANTS:
        return []
    if name in FUNCTIONS or name == WHERE:
        raise ConfigurationError(f"holds the function {name} without its argument; write {name}(...)")
    raise ConfigurationError(f"uses {_short(name)!r}, which is none of {', '.join(names)}{_suggestion(name, names)}")


def _arguments(name: str, arguments: list[ast.expr]) -> list[ast.expr]:
    if name != WHERE and name not in FUNCTIONS:
        known = (*FUNCTIONS, WHERE)
        raise ConfigurationError(
            f"calls {_short(name)!r}, which is none of the functions {', '.join(known)}{_suggestion(name, known)}"
        )
    wanted = 3 if name == WHERE else FUNCTIONS[name].nin
    if len(arguments) != wanted:
        raise ConfigurationError(f"gives {name} {len(arguments)} arguments; it takes {wanted}")
    return arguments


def _require_finite(node: ast.AST) -> None:
    """Refuse a part without names that is no finite number, such as 1/0 or 9**9**9, before any data are seen."""
    constant = not any(isinstance(n, ast.Name) and n.id not in RESERVED for n in ast.walk(node))
    if constant and not isinstance(node, ast.Name):
        with np.errstate(all="ignore"):
            finite = np.isfinite(_value(node, {}))
        if not finite:
            raise ConfigurationError(f"holds {_shown(node)}, which is not a finite number")


def _value(node: ast.AST, values: Values) -> FloatArray:
    """Value of a checked tree."""
    match node:
        case ast.Constant(value=number):
            assert isinstance(number, int | float)
            return np.asarray(_float(number))
        case ast.Name(id=name):
            return np.asarray(values[name] if name in values else CONSTANTS[name])
        case ast.UnaryOp(op=op, operand=operand):
            return np.asarray(_UNARY[type(op)](_value(operand, values)))
        case ast.BinOp(left=left, op=operator, right=right):
            return np.asarray(_BINARY[type(operator)](_value(left, values), _value(right, values)))
        case ast.Compare(left=left, ops=[comparison], comparators=[right]):
            truth: NDArray[np.bool_] = _COMPARE[type(comparison)](_value(left, values), _value(right, values))
            return np.asarray(truth, dtype=np.float64)  # numbers all the way: booleans cannot be subtracted
        case ast.Call(func=ast.Name(id=name), args=arguments):
            given = [_value(argument, values) for argument in arguments]
            return np.asarray(np.where(given[0] != 0, *given[1:]) if name == WHERE else FUNCTIONS[name](*given))
    raise AssertionError(f"{type(node).__name__} passed the check")


def _float(number: float) -> float:
    """A float, so that powers overflow to infinity at once instead of growing as exact integers."""
    try:
        return float(number)
    except OverflowError:  # an integer of more than 308 digits
        return math.inf


def _shown(node: ast.AST) -> str:
    """The part of the formula a node stands for, shortened."""
    return _short(ast.unparse(node))


def _short(text: str) -> str:
    return text if len(text) <= 40 else f"{text[:40]}..."


def _suggestion(word: str, choices: tuple[str, ...]) -> str:
    close = get_close_matches(word, choices, n=1)
    return f"; did you mean {close[0]!r}?" if close else ""
