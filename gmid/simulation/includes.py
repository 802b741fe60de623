"""Include files of a deck: found, read and put in place, a missing one never passed over."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from pathlib import Path

from gmid.errors import DataFault, FileTrouble

_INCLUDE = re.compile(r"^\s*\.inc(?:lude)?\s+(?P<name>\"[^\"]+\"|'[^']+'|\S+)", re.IGNORECASE)
_LIBRARY = re.compile(
    r"^\s*\.lib\s+(?P<name>\"[^\"]+\"|'[^']+'|\S+)\s+(?P<part>\S+)\s*$", re.IGNORECASE
)


def inline_includes(
    text: str, *, folder: Path | str = ".", files: Mapping[str, str] | None = None
) -> str:
    r"""Put the contents of include files in the place of the lines that name them.

    A missing include is an error here: the simulator itself would pass over it in silence.
    ``.lib file part`` lines get an absolute path.

    Parameters
    ----------
    text : str
        The deck.
    folder : path, keyword-only
        Where relative names are looked for.
    files : mapping of str to str, optional
        Contents by name, in place of files on disk.

    Returns
    -------
    str
        The deck without ``.include`` lines.

    Raises
    ------
    FileTrouble
        A file cannot be read.
    DataFault
        A file includes itself.

    Examples
    --------
    >>> print(inline_includes("title\n.include m.inc", files={"m.inc": ".param a=1"}))
    title
    .param a=1
    """
    return "\n".join(_expand(text, Path(folder).resolve(), files or {}, ()))


def _expand(
    text: str, folder: Path, files: Mapping[str, str], trail: tuple[str, ...]
) -> Iterator[str]:
    for number, line in enumerate(text.splitlines(), start=1):
        library = _LIBRARY.match(line)
        if library:
            path = folder / library["name"].strip("\"'")
            if not path.is_file():
                raise FileTrouble(f"{path} is not there.", where=_place(trail, number))
            yield f'.lib "{path}" {library["part"]}'
            continue
        include = _INCLUDE.match(line)
        if not include:
            yield line
            continue
        name = include["name"].strip("\"'")
        inner, inner_folder = _read_include(name, folder, files, _place(trail, number))
        key = name if name in files else str(inner_folder / Path(name).name)
        if key in trail:
            raise DataFault(f"{name} includes itself.", where=_place(trail, number))
        yield from _expand(inner, inner_folder, files, (*trail, key))


def _place(trail: tuple[str, ...], number: int) -> str:
    return f"{trail[-1] if trail else 'deck'}:{number}"


def _read_include(
    name: str, folder: Path, files: Mapping[str, str], where: str
) -> tuple[str, Path]:
    if name in files:
        return files[name], folder
    path = (folder / name).resolve()
    try:
        return path.read_text(encoding="utf-8"), path.parent
    except OSError as error:
        raise FileTrouble(f"cannot read {path}: {error.strerror}.", where=where) from error
