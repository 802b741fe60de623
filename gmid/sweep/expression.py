"""Expressions in a file's own column names: ``-i(vd)``, ``v(d) - v(s)``, ``1/ro``.

Known are ``+ - * / ( )``, ``abs``, ``re`` and ``im`` (of complex columns) and numbers.  Column
names come first, the longest that fits, case-blind; back quotes force a name.  Nothing is ever
evaluated as Python.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault, UnknownName, advise

_NUMBER = re.compile(r"(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")
_WORD = re.compile(r"[^\s+*/()-][^\s+*/-]*")
_OPERATORS = "+-*/()"
_FUNCTIONS: dict[str, Callable[[Any], Any]] = {"abs": np.abs, "re": np.real, "im": np.imag}

Node = tuple[Any, ...]


@dataclass(frozen=True)
class Expression:
    """A parsed expression, ready to be evaluated on columns.

    Parameters
    ----------
    text : str
        As the recipe has it.
    tree : tuple
        Nested nodes: ``("column", name)``, ``("number", value)``, ``("abs", node)``
        (likewise ``re``, ``im``),
        ``("negate", node)`` or ``(operator, left, right)``.
    columns : tuple of str
        Names of the columns it needs, each once.

    Examples
    --------
    >>> parse_expression("-i(vd)", ["v-sweep", "i(vd)"]).columns
    ('i(vd)',)
    """

    text: str
    tree: Node
    columns: tuple[str, ...]

    def evaluate(self, lookup: Mapping[str, NDArray[Any]]) -> NDArray[Any]:
        """Compute the value on every row.

        Parameters
        ----------
        lookup : mapping of str to ndarray, shape (n_rows,)
            The columns named in `columns`.

        Returns
        -------
        ndarray, shape (n_rows,) or ()
            Infinite or not a number where a row divides by zero; the grid check names the row.

        Examples
        --------
        >>> parse_expression("1/ro", ["ro"]).evaluate({"ro": np.array([2.0, 4.0])})
        array([0.5 , 0.25])
        """
        with np.errstate(all="ignore"):
            return np.asarray(_evaluate(self.tree, lookup))


def parse_expression(text: str, names: Sequence[str], *, where: str | None = None) -> Expression:
    """Parse an expression against the column names of a file.

    Parameters
    ----------
    text : str
        The expression.
    names : sequence of str
        Column names as the file has them.
    where : str, optional
        Place for error messages (the recipe's key).

    Returns
    -------
    Expression
        The parsed expression.

    Raises
    ------
    UnknownName
        If a word is no column; the nearest one is named.
    DataFault
        If the expression is not well formed.

    Examples
    --------
    >>> parse_expression("v(d)-v(s)", ["v(d)", "v(s)"]).columns
    ('v(d)', 'v(s)')
    """
    parser = _Parser(text, _tokenise(text, names, where), where)
    tree = parser.sum()
    parser.expect_end()
    used: dict[str, None] = {}
    _collect(tree, used)
    return Expression(text, tree, tuple(used))


def _tokenise(text: str, names: Sequence[str], where: str | None) -> list[tuple[str, Any]]:
    ordered = sorted({name: None for name in names if name}, key=len, reverse=True)
    tokens: list[tuple[str, Any]] = []
    position = 0
    while position < len(text):
        char = text[position]
        if char.isspace():
            position += 1
            continue
        if char == "`":
            end = text.find("`", position + 1)
            if end < 0:
                raise DataFault(f"a back quote is not closed in {text!r}.", where=where)
            tokens.append(("column", _known(text[position + 1 : end], ordered, where)))
            position = end + 1
            continue
        name = _column_at(text, position, ordered)
        if name is not None:
            tokens.append(("column", name))
            position += len(name)
            continue
        if match := _NUMBER.match(text, position):
            if _continues(text, match.end()):
                raise _unknown(_word(text, position), ordered, where)
            tokens.append(("number", float(match.group())))
            position = match.end()
            continue
        function = next((word for word in _FUNCTIONS if _has_word(text, position, word)), None)
        if function is not None:
            tokens.append((function, None))
            position += len(function)
            continue
        if char not in _OPERATORS:
            raise _unknown(_word(text, position), ordered, where)
        tokens.append((char, None))
        position += 1
    return tokens


def _column_at(text: str, position: int, ordered: Sequence[str]) -> str | None:
    """Return the longest column name that stands at a position and ends there as a word."""
    rest = text[position:].lower()
    for name in ordered:
        if rest.startswith(name.lower()) and not (
            (name[-1].isalnum() or name[-1] == "_") and _continues(text, position + len(name))
        ):
            return name
    return None


def _has_word(text: str, position: int, word: str) -> bool:
    end = position + len(word)
    return text[position:end].lower() == word and not _continues(text, end)


def _continues(text: str, position: int) -> bool:
    return position < len(text) and (text[position].isalnum() or text[position] in "_@[.")


def _word(text: str, position: int) -> str:
    match = _WORD.match(text, position)
    word = match.group() if match else text[position]
    while word.count(")") > word.count("("):
        word = word[:-1]
    return word or text[position]


def _known(name: str, names: Sequence[str], where: str | None) -> str:
    for candidate in names:
        if candidate == name:
            return candidate
    for candidate in names:
        if candidate.lower() == name.lower():
            return candidate
    raise _unknown(name, names, where)


def _unknown(name: str, names: Sequence[str], where: str | None) -> UnknownName:
    return UnknownName(
        f"there is no column {name!r}.", where=where, hint=advise(name, sorted(names))
    )


class _Parser:
    """Recursive descent over the tokens: sum, product, sign, value."""

    def __init__(self, text: str, tokens: list[tuple[str, Any]], where: str | None) -> None:
        self.text, self.tokens, self.where, self.position = text, tokens, where, 0

    def peek(self) -> str:
        return self.tokens[self.position][0] if self.position < len(self.tokens) else ""

    def take(self) -> tuple[str, Any]:
        token = self.tokens[self.position]
        self.position += 1
        return token

    def fail(self) -> DataFault:
        return DataFault(
            f"{self.text!r} is not a well-formed expression.",
            where=self.where,
            hint="Known are + - * / ( ), abs, re, im, numbers and the file's column names.",
        )

    def expect_end(self) -> None:
        if self.position != len(self.tokens):
            raise self.fail()

    def _chain(self, operators: str, operand: Callable[[], Node]) -> Node:
        node = operand()
        while (sign := self.peek()) and sign in operators:
            self.take()
            node = (sign, node, operand())
        return node

    def sum(self) -> Node:
        return self._chain("+-", self.product)

    def product(self) -> Node:
        return self._chain("*/", self.sign)

    def sign(self) -> Node:
        if self.peek() == "-":
            self.take()
            return ("negate", self.sign())
        if self.peek() == "+":
            self.take()
            return self.sign()
        return self.value()

    def value(self) -> Node:
        kind = self.peek()
        if kind in ("column", "number"):
            return self.take()
        if kind in _FUNCTIONS:
            self.take()
            if self.peek() != "(":
                raise self.fail()
            return (kind, self.value())
        if kind == "(":
            self.take()
            node = self.sum()
            if self.peek() != ")":
                raise self.fail()
            self.take()
            return node
        raise self.fail()


def _collect(node: Node, used: dict[str, None]) -> None:
    if node[0] == "column":
        used[node[1]] = None
        return
    for part in node[1:]:
        if isinstance(part, tuple):
            _collect(part, used)


def _evaluate(node: Node, lookup: Mapping[str, NDArray[Any]]) -> Any:
    kind = node[0]
    if kind == "column":
        return lookup[node[1]]
    if kind == "number":
        return node[1]
    if kind in _FUNCTIONS:
        return _FUNCTIONS[kind](_evaluate(node[1], lookup))
    if kind == "negate":
        return -_evaluate(node[1], lookup)
    left, right = (_evaluate(part, lookup) for part in node[1:])
    if kind == "+":
        return left + right
    if kind == "-":
        return left - right
    if kind == "*":
        return left * right
    return np.divide(left, right)
