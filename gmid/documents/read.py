"""Reading a TOML document into a model that keeps its lines."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Generic, TypeVar

from pydantic import BaseModel, ValidationError

from gmid.documents.faults import explain_faults
from gmid.documents.fields import describe
from gmid.documents.locate import KeyPath, dotted, locate_keys, nearest_line
from gmid.errors import DataFault, FileTrouble, GmidError, raise_faults

M = TypeVar("M", bound=BaseModel)

_PLACE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")
_SLIPS = (
    ("Expected newline", 'A number with a unit stands in quotes, as in voltage = "1.8 V".'),
    ("Invalid value", "A text stands in quotes, and a number with a unit too."),
    ("Cannot overwrite", "A key stands once in its table; remove one of the two."),
    ("Cannot declare", "A table has one header; join the two, or write [[ ]] for each item."),
)


@dataclass(frozen=True, repr=False)
class Document(Generic[M]):
    r"""A document that was read: its model, and the line of every key.

    Parameters
    ----------
    model : BaseModel
        The typed content.
    name : str
        The file's name as it was given, for messages.
    path : Path or None
        The file, when there is one.
    data : mapping
        The content as TOML gives it, for writing it again.
    lines : mapping of KeyPath to int
        Line of every key; positions in lists count from 0.

    Examples
    --------
    >>> from gmid.documents import Model
    >>> class Top(Model):
    ...     order: int
    >>> document = parse_document("format = 1\norder = 5", Top, name="request.toml")
    >>> document.model.order, document.where("order")
    (5, 'request.toml:2')
    """

    model: M
    name: str
    path: Path | None
    data: Mapping[str, Any]
    lines: Mapping[KeyPath, int]

    def where(self, *key: str | int) -> str:
        """Give file and line of a key, or of the nearest table around it.

        Parameters
        ----------
        *key : str or int
            Keys from the top; positions in lists count from 0.

        Returns
        -------
        str
            Such as ``request.toml:10``.

        Examples
        --------
        >>> from gmid.documents import Model
        >>> parse_document("format = 1", Model, name="a.toml").where("supply", "voltage")
        'a.toml:1'
        """
        return f"{self.name}:{nearest_line(self.lines, key)}"

    def fault(self, message: str, *key: str | int, hint: str | None = None) -> DataFault:
        """Make an error about the value at a key.

        Parameters
        ----------
        message : str
            What is there and what was expected; the key is put before it.
        *key : str or int
            Keys from the top; positions in lists count from 0.
        hint : str, optional
            What to do.

        Returns
        -------
        DataFault
            To be raised, or collected for `gmid.errors.raise_faults`.

        Examples
        --------
        >>> from gmid.documents import Model
        >>> document = parse_document("format = 1", Model, name="a.toml")
        >>> print(document.fault("lies above stop_edge.", "filter", "edge"))
        a.toml:1: filter.edge: lies above stop_edge.
        """
        return DataFault(f"{dotted(key)}: {message}", where=self.where(*key), hint=hint)

    def beside(self, name: str | Path) -> Path:
        """Resolve a path that the document gives relative to itself.

        Parameters
        ----------
        name : str or Path
            As it stands in the document.

        Returns
        -------
        Path
            Seen from the working directory.

        Examples
        --------
        >>> from gmid.documents import Model
        >>> parse_document("format = 1", Model, name="a.toml").beside("b.h5").name
        'b.h5'
        """
        return Path(name) if self.path is None else self.path.parent / name

    def __repr__(self) -> str:
        return f"Document({self.name!r}, {type(self.model).__name__})"


def read_document(
    path: str | Path, model: type[M], *, versions: Collection[int] = (1,)
) -> Document[M]:
    """Read a TOML file into a model.

    Parameters
    ----------
    path : str or Path
        The file.
    model : type of BaseModel
        What the file must hold; ``format`` need not be among its fields.
    versions : collection of int
        Values of ``format`` that are read.

    Returns
    -------
    Document
        The model with the lines of its keys.

    Raises
    ------
    FileTrouble
        If the file cannot be read.
    DataFault
        If it is not TOML, or of another format.
    UnknownName
        If a key is not known.
    Faults
        If it has several faults.

    Examples
    --------
    >>> from gmid.documents import Model
    >>> read_document("absent.toml", Model)
    Traceback (most recent call last):
        ...
    gmid.errors.FileTrouble: absent.toml: there is no such file.
    """
    file, name = Path(path), str(path)
    try:
        raw = file.read_bytes()
    except FileNotFoundError:
        raise FileTrouble("there is no such file.", where=name) from None
    except IsADirectoryError:
        raise FileTrouble("is a directory, not a file.", where=name) from None
    except OSError as trouble:
        raise FileTrouble(f"cannot be read: {trouble.strerror}.", where=name) from trouble
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as trouble:
        line = raw[: trouble.start].count(b"\n") + 1
        raise DataFault(
            "holds a byte that is not UTF-8.", where=f"{name}:{line}",
            hint="Save the file as UTF-8 text.",
        ) from None  # fmt: skip
    return parse_document(text, model, name=name, path=file, versions=versions)


def parse_document(
    text: str,
    model: type[M],
    *,
    name: str = "document",
    path: Path | None = None,
    versions: Collection[int] = (1,),
) -> Document[M]:
    """Read TOML text into a model.

    Parameters
    ----------
    text : str
        The document.
    model : type of BaseModel
        What it must hold; ``format`` need not be among its fields.
    name : str
        Name of the file, for messages.
    path : Path, optional
        The file, for paths relative to it.
    versions : collection of int
        Values of ``format`` that are read.

    Returns
    -------
    Document
        The model with the lines of its keys.

    Raises
    ------
    DataFault
        If it is not TOML, or of another format.
    UnknownName
        If a key is not known.
    Faults
        If it has several faults.

    Examples
    --------
    >>> from gmid.documents import Model
    >>> parse_document("format = 2", Model, name="a.toml")
    Traceback (most recent call last):
        ...
    gmid.errors.DataFault: a.toml:1: format = 2 is not read here. This version reads format = 1.
    """
    data, lines = _parse(text, name)
    faults = _check_format(data, lines, name, versions)
    content = {key: _frozen(value) for key, value in data.items()}
    if "format" not in model.model_fields:
        content.pop("format", None)
    try:
        result = model.model_validate(content)
    except ValidationError as trouble:
        errors: list[Any] = trouble.errors(include_url=False)
        faults += explain_faults(errors, content, model, lines=lines, name=name)
        raise_faults(faults)
        raise
    raise_faults(faults)
    return Document(result, name, path, data, lines)


def _parse(text: str, name: str) -> tuple[dict[str, Any], dict[KeyPath, int]]:
    """Read the text, with the reader's complaints put into our words."""
    try:
        return tomllib.loads(text), locate_keys(text)
    except RecursionError:
        raise DataFault("is nested too deeply to be read.", where=name) from None
    except ValueError as trouble:
        message = str(trouble)
        place = _PLACE.search(message)
        plain = _PLACE.sub("", message)
        last = text.count("\n") + (not text.endswith("\n"))
        line = place[1] if place and place[1] else last
        column = f" (column {place[2]})" if place and place[2] else ""
        hint = next((slip[1] for slip in _SLIPS if plain.startswith(slip[0])), None)
        raise DataFault(
            f"not valid TOML: {plain[:1].lower()}{plain[1:]}{column}.",
            where=f"{name}:{line}", hint=hint,
        ) from None  # fmt: skip


def _check_format(
    data: Mapping[str, Any],
    lines: Mapping[KeyPath, int],
    name: str,
    versions: Collection[int],
) -> list[GmidError]:
    """Refuse another format at once; a missing one is a fault like others."""
    where = f"{name}:{nearest_line(lines, ('format',))}"
    known = " or ".join(str(version) for version in versions)
    if "format" not in data:
        hint = f"Write format = {known} at the top of the file."
        return [DataFault("format is missing.", where=where, hint=hint)]
    given = data["format"]
    if type(given) is not int or given not in versions:
        raise DataFault(
            f"format = {describe(given)} is not read here.", where=where,
            hint=f"This version reads format = {known}.",
        )  # fmt: skip
    return []


def _frozen(value: Any) -> Any:
    """Give lists as tuples, which frozen models hold."""
    if isinstance(value, list):
        return tuple(_frozen(item) for item in value)
    if isinstance(value, dict):
        return {key: _frozen(item) for key, item in value.items()}
    return value
