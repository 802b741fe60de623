"""What a filter asks of its amplifiers."""

from __future__ import annotations

from pathlib import Path

from gmid.errors import DataFault
from gmid.filters.demand import demands_of
from gmid.filters.demand_types import FilterDemands
from gmid.request.reading import read_request
from gmid.request.request import Request


def demands(request: str | Path | Request) -> FilterDemands:
    """Find what each amplifier of a request's filter must meet, and why.

    Parameters
    ----------
    request : str, Path or Request
        With a ``[filter]``.

    Returns
    -------
    FilterDemands
        Sections, elements, demands.

    Raises
    ------
    GmidError
        If the request is at fault, has no filter, or no amplifier can meet it.

    Examples
    --------
    >>> from gmid.request.reading import parse_request
    >>> from gmid.request.request import EXAMPLE
    >>> demands(parse_request(EXAMPLE, name="a.toml"))
    Traceback (most recent call last):
    ...
    gmid.errors.DataFault: a.toml: the request has no [filter]. It states [demands] itself.
    """
    asked = request if isinstance(request, Request) else read_request(request)
    if asked.spec is None or asked.tolerance is None:
        raise DataFault(
            "the request has no [filter].", where=asked.name, hint="It states [demands] itself."
        )
    return demands_of(
        asked.spec, asked.tolerance, asked.passives, phase_margin=asked.choices.loop_phase_margin
    )
