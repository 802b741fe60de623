"""A small search on invented devices, for examples."""

from __future__ import annotations

from gmid.amplifier.example import example_devices, example_supply
from gmid.amplifier.plan import Choices, Requirement
from gmid.amplifier.search.searcher import Searcher
from gmid.amplifier.search.sketch import Charts, draw_charts
from gmid.amplifier.search.space import Space

EXAMPLE_CHOICES = Choices(input_pair="n", output="plain", common_mode_sense="resistors")
"""One form only."""


def example_search() -> Searcher:
    """Make a search for a plain amplifier of 5 MHz.

    Returns
    -------
    Searcher
        Not yet run.

    Examples
    --------
    >>> example_search().task.load
    (1e-12, 1000000.0)
    """
    devices = example_devices()
    return Searcher(
        {"gbw": Requirement(5e6)}, (1e-12, 1e6), [(devices["nmos"].condition, devices)],
        {"n": "nmos", "p": "pmos"}, (), example_supply(), EXAMPLE_CHOICES, {},
    )  # fmt: skip


def example_space() -> Space:
    """Give the space of the only form of `example_search`.

    Returns
    -------
    Space
        With the lengths of the table.

    Examples
    --------
    >>> str(example_space().form.variant)
    'n-input, plain, resistors'
    """
    (space,) = example_search().list_spaces()
    return space


def example_charts() -> Charts:
    """Draw the charts of `example_search` at its low supply.

    Returns
    -------
    Charts
        Of its only condition.

    Examples
    --------
    >>> round(example_charts().voltage, 2)
    1.62
    """
    task = example_search().task
    return draw_charts(example_space(), task.book, 0, task.supply, 1.62, task.swing)
