"""A reviewed example amplifier, for examples of the sheet; all of it invented."""

from __future__ import annotations

from functools import lru_cache

from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.sheet.amplifiers import Reviewed, fill_amplifier, review_plan
from gmid.sheet.data import AmplifierSheet


@lru_cache(maxsize=1)
def sample_review() -> Reviewed:
    """Review the example amplifier.

    Returns
    -------
    Reviewed
        In one condition.

    Examples
    --------
    >>> sample_review().plan.name
    'a1'
    """
    devices = example_devices()
    bench = [(devices["nmos"].condition, devices)]
    return review_plan(example_plan(), bench, example_supply())


@lru_cache(maxsize=1)
def sample_amplifier() -> AmplifierSheet:
    """Fill the sheet of the example amplifier.

    Returns
    -------
    AmplifierSheet
        Its rows.

    Examples
    --------
    >>> sample_amplifier().name
    'a1'
    """
    return fill_amplifier(sample_review())
