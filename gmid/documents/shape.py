"""What a model allows at some key: the known keys, the words, whether it is a table."""

from __future__ import annotations

import types
from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal, Union, get_args, get_origin

from pydantic import BaseModel

from gmid.documents.fields import AUTO
from gmid.documents.locate import KeyPath


def leaves(annotation: Any) -> Iterator[Any]:
    """Take a type apart into the members of its unions and its annotations.

    Parameters
    ----------
    annotation : type
        As a model declares it.

    Yields
    ------
    object
        Plain types, generic types such as ``tuple[int, ...]``, and annotation objects.

    Examples
    --------
    >>> list(leaves(int | None)) == [int, type(None)]
    True
    """
    origin = get_origin(annotation)
    if origin is Annotated:
        inner, *extras = get_args(annotation)
        yield from leaves(inner)
        yield from extras
    elif origin is Union or origin is types.UnionType:
        for member in get_args(annotation):
            yield from leaves(member)
    else:
        yield annotation


def shape_at(model: type[BaseModel], path: KeyPath) -> list[Any]:
    """List the types and annotations that a model declares at a key.

    Parameters
    ----------
    model : type of BaseModel
        Model of the whole document.
    path : KeyPath
        Keys from the top.

    Returns
    -------
    list
        Leaves as `leaves` gives them; empty for an unknown key.

    Examples
    --------
    >>> from gmid.documents.fields import Model
    >>> class Top(Model):
    ...     counts: tuple[int, ...]
    >>> shape_at(Top, ("counts", 0))
    [<class 'int'>]
    """
    found: list[Any] = [model]
    for part in path:
        found = [leaf for outer in found for leaf in _inner(outer, part)]
    return found


def _inner(outer: Any, part: str | int) -> Iterator[Any]:
    """Step from a type to what it holds at one key or position."""
    if isinstance(outer, type) and issubclass(outer, BaseModel):
        for name, field in outer.model_fields.items():
            if (field.alias or name) == part:
                yield from leaves(field.annotation)
                yield from field.metadata
        return
    origin, inner = get_origin(outer), get_args(outer)
    if isinstance(part, str):
        if isinstance(origin, type) and issubclass(origin, Mapping) and len(inner) == 2:
            yield from leaves(inner[1])
    elif origin is tuple and inner:
        if len(inner) == 2 and inner[1] is Ellipsis:
            yield from leaves(inner[0])
        elif part < len(inner):
            yield from leaves(inner[part])


def known_keys(shape: list[Any]) -> list[str]:
    """List the keys which the tables among some leaves know.

    Parameters
    ----------
    shape : list
        From `shape_at`.

    Returns
    -------
    list of str
        Names as they stand in a file.

    Examples
    --------
    >>> known_keys([int])
    []
    """
    return [
        field.alias or name
        for leaf in shape
        if isinstance(leaf, type) and issubclass(leaf, BaseModel)
        for name, field in leaf.model_fields.items()
    ]


def known_words(shape: list[Any]) -> list[Any]:
    """List the words which the literals among some leaves allow.

    Parameters
    ----------
    shape : list
        From `shape_at`.

    Returns
    -------
    list
        Words, or numbers where the literal has some.

    Examples
    --------
    >>> known_words([Literal["n", "p"]])
    ['n', 'p']
    """
    return [word for leaf in shape if get_origin(leaf) is Literal for word in get_args(leaf)]


def pair_size(shape: list[Any]) -> int | None:
    """Tell how many values a list of fixed length holds.

    Parameters
    ----------
    shape : list
        From `shape_at`.

    Returns
    -------
    int or None
        The number; None when the length is free.

    Examples
    --------
    >>> pair_size([tuple[float, float]]), pair_size([tuple[float, ...]])
    (2, None)
    """
    for leaf in shape:
        inner = get_args(leaf)
        if get_origin(leaf) is tuple and Ellipsis not in inner:
            return len(inner)
    return None


def is_auto(shape: list[Any]) -> bool:
    """Tell whether the word ``auto`` may stand there.

    Parameters
    ----------
    shape : list
        From `shape_at`.

    Returns
    -------
    bool
        True when the field carries `AUTO`.

    Examples
    --------
    >>> is_auto([float, AUTO])
    True
    """
    return any(leaf is AUTO for leaf in shape)


def table_form(shape: list[Any], path: KeyPath) -> str | None:
    """Give the header under which a missing table would be written.

    Parameters
    ----------
    shape : list
        From `shape_at`.
    path : KeyPath
        Where it is missing.

    Returns
    -------
    str or None
        ``[name]`` or ``[[name]]``; None when no table is meant.

    Examples
    --------
    >>> table_form([BaseModel], ("supply",)), table_form([tuple[BaseModel, ...]], ("sweep",))
    ('[supply]', '[[sweep]]')
    """
    name = ".".join(part for part in path if isinstance(part, str))
    if known_keys(shape) or any(leaf is BaseModel for leaf in shape):
        return f"[{name}]"
    for leaf in shape:
        inner = get_args(leaf)
        if get_origin(leaf) is tuple and any(
            isinstance(member, type) and issubclass(member, BaseModel) for member in inner
        ):
            return f"[[{name}]]"
    return None
