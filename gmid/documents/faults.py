"""Faults of a model's validation, each as an error with key, what is there and what to do."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from pydantic import BaseModel

from gmid.documents.fields import CarriedFault, describe
from gmid.documents.locate import KeyPath, dotted, nearest_line
from gmid.documents.shape import (
    is_auto,
    known_keys,
    known_words,
    pair_size,
    shape_at,
    table_form,
)
from gmid.errors import DataFault, Faults, GmidError, UnknownName, advise

_KINDS = {
    "string_type": "a text in quotes",
    "int_type": "a whole number",
    "int_from_float": "a whole number",
    "float_type": "a number",
    "bool_type": "true or false",
    "tuple_type": "a list in [ ]",
    "dict_type": "a table",
    "model_type": "a table",
}
_BOUNDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "at most"),
}


@dataclass(frozen=True)
class _Finding:
    """One error of the model library, put at a key of the file."""

    path: KeyPath
    kind: str
    value: Any
    context: Mapping[str, Any]
    message: str
    anchor: KeyPath | None
    branch: str | None


def explain_faults(
    errors: Iterable[Mapping[str, Any]],
    data: Mapping[str, Any],
    model: type[BaseModel],
    *,
    lines: Mapping[KeyPath, int],
    name: str,
) -> list[GmidError]:
    """Turn what the model library found into errors of this package.

    Parameters
    ----------
    errors : iterable of mapping
        As the library lists them.
    data : mapping
        The document as read.
    model : type of BaseModel
        Model of the whole document.
    lines : mapping of KeyPath to int
        From `locate_keys`.
    name : str
        Name of the file.

    Returns
    -------
    list of GmidError
        In the order of their lines, each once.

    Examples
    --------
    >>> from gmid.documents.fields import Model
    >>> raw = {"type": "extra_forbidden", "loc": ("b",), "msg": "", "input": 1}
    >>> class Top(Model):
    ...     a: int = 1
    >>> print(explain_faults([raw], {"b": 1}, Top, lines={("b",): 3}, name="x.toml")[0])
    x.toml:3: b is not a known key. There is only a.
    """
    found: dict[str, tuple[int, GmidError]] = {}
    for finding in _choose_branches([_place(error, data) for error in errors]):
        owner = finding.path[:-1] if finding.kind == "missing" else finding.path
        line = nearest_line(lines, owner)
        for fault in _explain(finding, shape_at(model, finding.path), model):
            placed = _located(fault, f"{name}:{line}")
            found.setdefault(str(placed), (line, placed))
    return [fault for _, fault in sorted(found.values(), key=lambda entry: entry[0])]


def _place(error: Mapping[str, Any], data: Mapping[str, Any]) -> _Finding:
    """Tell keys of the file from the names of union members in an error's location."""
    location = tuple(error["loc"])
    kind = error["type"]
    absent = location[-1:] if kind == "missing" else ()
    path: KeyPath = ()
    anchor, branch = None, None
    here: Any = data
    for part in location[: len(location) - len(absent)]:
        inside_table = isinstance(here, Mapping) and part in here
        if inside_table or (isinstance(here, (list, tuple)) and isinstance(part, int)):
            path, here = (*path, part), here[part]
        elif anchor is None:
            anchor, branch = path, str(part)
    context = error.get("ctx", {})
    path = (*path, *absent)
    return _Finding(path, kind, error["input"], context, error["msg"], anchor, branch)


def _choose_branches(findings: list[_Finding]) -> Iterator[_Finding]:
    """Of the members of a union keep the one that the file seems to mean."""
    branches: dict[KeyPath, dict[str, list[_Finding]]] = {}
    for finding in findings:
        if finding.anchor is not None and finding.branch is not None:
            group = branches.setdefault(finding.anchor, {})
            group.setdefault(finding.branch, []).append(finding)
    chosen = {anchor: _best_branch(anchor, group) for anchor, group in branches.items()}
    for finding in findings:
        if finding.anchor is None or chosen[finding.anchor] in (finding.branch, None):
            yield finding
        elif chosen[finding.anchor] == "":
            kinds = [_KINDS[entry[0].kind] for entry in branches[finding.anchor].values()]
            message = f"expected {' or '.join(dict.fromkeys(kinds))}, found "
            yield _Finding(
                finding.anchor, "kinds", finding.value, {"expected": message}, "", None, None
            )


def _best_branch(anchor: KeyPath, group: Mapping[str, list[_Finding]]) -> str | None:
    """Name the union member to report, "" for none of them, None for all."""
    if len(group) == 1:
        return None
    misfit = {
        branch: any(entry.path == anchor and entry.kind in _KINDS for entry in entries)
        for branch, entries in group.items()
    }
    if all(misfit.values()):
        return ""
    return min(group, key=lambda branch: (misfit[branch], len(group[branch])))


def _explain(finding: _Finding, shape: list[Any], model: type[BaseModel]) -> Iterator[GmidError]:
    """Word one finding; the place is added by the caller."""
    key = dotted(finding.path)
    if finding.kind == "extra_forbidden":
        known = known_keys(shape_at(model, finding.path[:-1]))
        advice = advise(str(finding.path[-1]), known)
        yield UnknownName(f"{key} is not a known key.", hint=advice)
    elif finding.kind == "missing":
        yield _missing(finding, key, shape, shape_at(model, finding.path[:-1]))
    elif "error" in finding.context:
        yield from _carried(finding.context["error"], key, shape)
    else:
        message, way_out = _words(finding, shape)
        hint = _with_auto(way_out, shape)
        yield DataFault(f"{key}: {message}" if key else message, hint=hint)


def _missing(finding: _Finding, key: str, shape: list[Any], outer: list[Any]) -> DataFault:
    if isinstance(finding.path[-1], int):
        owner, found = dotted(finding.path[:-1]), len(finding.value)
        return DataFault(f"{owner}: expected {pair_size(outer)} values, found {found}.")
    header = table_form(shape, finding.path)
    if header is not None:
        return DataFault(f"{key} is missing.", hint=f"Add the table {header}.")
    words = known_words(shape)
    hint = f"It is one of: {_listed(words)}." if words else None
    return DataFault(f"{key} is missing.", hint=hint)


def _carried(error: Exception, key: str, shape: list[Any]) -> Iterator[GmidError]:
    """Unpack an error that a field's own reader or a model's own check raised."""
    inner = error.fault if isinstance(error, CarriedFault) else error
    if isinstance(inner, Faults):
        for fault in inner.faults:
            yield from _carried(fault, key, shape)
    elif isinstance(inner, GmidError):
        message = f"{key}: {inner.message}" if key else inner.message
        yield _remade(inner, message, _with_auto(inner.hint, shape))
    else:
        yield DataFault(f"{key}: {inner}" if key else str(inner))


def _remade(fault: GmidError, message: str, hint: str | None) -> GmidError:
    return type(fault)(message, where=fault.where, hint=hint)


def _located(fault: GmidError, where: str) -> GmidError:
    return type(fault)(fault.message, where=fault.where or where, hint=fault.hint)


def _with_auto(hint: str | None, shape: list[Any]) -> str | None:
    if not is_auto(shape):
        return hint
    return f"{hint} Or write 'auto'." if hint else "Or write 'auto'."


def _words(finding: _Finding, shape: list[Any]) -> tuple[str, str | None]:
    """Word what is wrong with a value: message and hint."""
    kind, there, context = finding.kind, describe(finding.value), finding.context
    if kind in _KINDS:
        bare = isinstance(finding.value, str) and finding.value.lstrip("+-").isdigit()
        hint = "Write it without quotes." if bare and kind == "int_type" else None
        return f"expected {_KINDS[kind]}, found {there}.", hint
    if kind in _BOUNDS:
        bound, word = _BOUNDS[kind]
        return f"must be {word} {context[bound]:g}, found {there}.", None
    special: Callable[[_Finding, list[Any]], tuple[str, str | None]] | None = _SPECIAL.get(kind)
    if special is not None:
        return special(finding, shape)
    return f"{finding.message.replace('Input should', 'must')}, found {there}.", None


def _literal(finding: _Finding, shape: list[Any]) -> tuple[str, str | None]:
    words = known_words(shape)
    near = difflib.get_close_matches(str(finding.value).lower(), [str(w) for w in words], n=1)
    hint = f"Did you mean {near[0]}?" if near else None
    many = "one of " if len(words) > 1 else ""
    return f"expected {many}{_listed(words)}, found {describe(finding.value)}.", hint


def _too_long(finding: _Finding, shape: list[Any]) -> tuple[str, str | None]:
    size = pair_size(shape)
    most = f"at most {finding.context['max_length']}" if size is None else str(size)
    return f"expected {most} values, found {len(finding.value)}.", None


def _too_short(finding: _Finding, shape: list[Any]) -> tuple[str, str | None]:
    least = finding.context["min_length"]
    return f"expected at least {least} values, found {len(finding.value)}.", None


_SPECIAL: dict[str, Callable[[_Finding, list[Any]], tuple[str, str | None]]] = {
    "literal_error": _literal,
    "too_long": _too_long,
    "too_short": _too_short,
    "string_too_short": lambda finding, shape: ("must not be empty.", None),
    "finite_number": lambda finding, shape: (
        f"expected a finite number, found {describe(finding.value)}.", None,
    ),
    "kinds": lambda finding, shape: (
        f"{finding.context['expected']}{describe(finding.value)}.", None,
    ),
}  # fmt: skip


def _listed(words: Iterable[Any]) -> str:
    return ", ".join(str(word) for word in words)
