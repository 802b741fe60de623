"""The amplifiers of a filter sized: the entry to the loop between both."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from gmid.amplifier.filtering.loop import Finder, Opened, Progress
from gmid.amplifier.filtering.result import FilterSizing
from gmid.amplifier.filtering.rounds import Rounds
from gmid.amplifier.plan import Choices, Matching, Supply
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import DataFault
from gmid.filters.passives import Passives
from gmid.filters.spec import FilterSpec, Tolerance

__all__ = ["FilterSizing", "size_filter"]


def size_filter(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives | None = None, *,
    bench: Iterable[tuple[Condition, Mapping[str, Device]]], roles: Mapping[str, str],
    own_well: Sequence[str] = (), supply: Supply, choices: Choices | None = None,
    matching: Mapping[str, Matching] | None = None, progress: Progress | None = None,
    find: Finder | None = None,
) -> FilterSizing:  # fmt: skip
    """Size the amplifiers of a filter.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        How far it may be off.
    passives : Passives, optional
        What its elements are like; ideal by default.
    bench : iterable of (Condition, mapping of str to Device)
        Every condition with its devices.
    roles : mapping of str to str
        Device by role: `n`, `p`, and optionally `pair`, `follower`, `cascode`.
    own_well : sequence of str
        Devices whose bulk may go to the source.
    supply : Supply
        What the amplifiers are fed with.
    choices : Choices, optional
        What may be chosen, and margins to keep.
    matching : mapping of str to Matching, optional
        Mismatch by device.
    progress : callable, optional
        Called with the share done and what is being done.
    find : callable, optional
        Sizes one amplifier; `gmid.amplifier.search.find_plan` by default.

    Returns
    -------
    FilterSizing
        Also where something is missed: then with the nearest amplifiers.

    Raises
    ------
    NoSolution
        If no amplifier at all can keep the tolerance.
    DataFault
        If the filter cannot be realised.

    Examples
    --------
    >>> size_filter.__name__
    'size_filter'
    """
    finder = find
    if finder is None:
        from gmid.amplifier.search.find import find_plan

        finder = find_plan
    opened: Opened = tuple((condition, devices) for condition, devices in bench)
    if not opened:
        raise DataFault("there is no condition to size for.")
    work = Rounds(
        spec, tolerance, passives or Passives(), opened, dict(roles), tuple(own_well), supply,
        choices or Choices(), matching or {}, progress or (lambda share, words: None),
        finder,
    )  # fmt: skip
    return work.run()
