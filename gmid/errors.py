"""The error tree: one base class, one leaf for each way in which things go wrong.

Every message says what was asked, what is there and what to do.  `where` is the place a
user can open (``file:line``, a key of a file, a bias point); `hint` the way out.
"""

from __future__ import annotations

from collections.abc import Iterable


class GmidError(Exception):
    """Base of every error this package raises on purpose.

    Parameters
    ----------
    message : str
        What was asked and what is there.
    where : str, optional
        The place to look at, such as ``sweeps/nmos.txt:118``.
    hint : str, optional
        What to do about it.

    Examples
    --------
    >>> print(GmidError("expected 9 columns, found 8.", where="a.txt:118"))
    a.txt:118: expected 9 columns, found 8.
    """

    def __init__(self, message: str, *, where: str | None = None, hint: str | None = None) -> None:
        super().__init__(message)
        self.message = message
        self.where = where
        self.hint = hint

    def __str__(self) -> str:
        text = self.message if self.where is None else f"{self.where}: {self.message}"
        return text if self.hint is None else f"{text} {self.hint}"


class DataFault(GmidError, ValueError):
    """A file holds something that is wrong, damaged or not understood."""


class UsageFault(GmidError, ValueError):
    """A command or a call was put together wrongly."""


class UnknownName(GmidError, LookupError):
    """A device, condition, quantity, key or place that does not exist."""


class OutOfReach(GmidError, ValueError):
    """A bias point that the table does not cover; the message names what it does cover."""


class NoSolution(GmidError, ArithmeticError):
    """A circuit that has no bias point, or a search that found none."""


class FileTrouble(GmidError, OSError):
    """A file that cannot be read, written, replaced or locked."""


class MissingExtra(GmidError, ImportError):
    """An optional part of the installation is not there."""


class Faults(GmidError, ValueError):
    """Several faults of one file or request, told at once.

    Parameters
    ----------
    faults : iterable of GmidError
        At least one fault, in the order in which they are to be told.

    Examples
    --------
    >>> print(Faults([DataFault("no rows.", where="a.csv"), DataFault("no rows.", where="b.csv")]))
    a.csv: no rows.
    b.csv: no rows.
    """

    def __init__(self, faults: Iterable[GmidError]) -> None:
        self.faults = tuple(faults)
        if not self.faults:
            raise ValueError("Faults needs at least one fault")
        super().__init__("\n".join(str(fault) for fault in self.faults))


def raise_faults(faults: Iterable[GmidError]) -> None:
    """Raise the faults collected so far, if there are any.

    Parameters
    ----------
    faults : iterable of GmidError
        Nothing happens when it is empty; a single fault is raised as it is.

    Raises
    ------
    GmidError
        The only fault, or `Faults` with all of them.

    Examples
    --------
    >>> raise_faults([])
    """
    found = tuple(faults)
    if len(found) == 1:
        raise found[0]
    if found:
        raise Faults(found)


def advise(name: str, known: Iterable[str]) -> str:
    """Say which known name lies nearest to a wrong one, or list what there is.

    Parameters
    ----------
    name : str
        The name that was not found.
    known : iterable of str
        The names that exist.

    Returns
    -------
    str
        A sentence fit for the `hint` of an error.

    Examples
    --------
    >>> advise("comon_mode", ["common_mode", "voltage"])
    'Did you mean common_mode?'
    >>> advise("x", ["nmos", "pmos"])
    'There are: nmos, pmos.'
    """
    import difflib

    names = [str(entry) for entry in known]
    folded = {entry.lower(): entry for entry in names}
    close = difflib.get_close_matches(name.lower(), list(folded), n=1, cutoff=0.6)
    if close:
        return f"Did you mean {folded[close[0]]}?"
    if not names:
        return "There are none."
    return f"There are: {', '.join(names)}." if len(names) > 1 else f"There is only {names[0]}."
