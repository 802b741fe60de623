"""What every sheet says besides its numbers: supply, cautions, provenance."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from gmid.amplifier.plan import Matching, Supply
from gmid.condition import Condition
from gmid.quantity import format_quantity

CAUTIONS = (
    "Tables are only as good as the sweep they were made from, and the sweep as its models: "
    "verify this amplifier with the foundry's models before layout.",
    "Layout parasitics are not in these numbers: extract and simulate again, and follow the local "
    "design rules.",
    "Counts are units of the characterised transistor; another finger width, or shared drains, is "
    "another device.",
    "Performance is judged at the nominal reference current; saturation, the common-mode balance "
    "and the settled error also at the ends of its tolerance.",
    "Use in anything related to safety needs review by qualified people.",
)
"""On every sheet."""


def describe_supply(supply: Supply, conditions: Sequence[Condition]) -> str:
    """Say in which conditions and at which supplies everything was evaluated.

    Parameters
    ----------
    supply : Supply
        Voltages and reference.
    conditions : sequence of Condition
        Corners and temperatures.

    Returns
    -------
    str
        One sentence.

    Examples
    --------
    >>> describe_supply(Supply(1.8, 2e-6, tolerance=0.1), [Condition("tt", 27.0)])
    'Evaluated in tt/27, each at 1.62 V, 1.8 V, 1.98 V; reference current 2 uA.'
    """
    levels = dict.fromkeys(format_quantity(float(v), "V") for v in supply.voltages)
    reference = format_quantity(supply.reference_current, "A")
    if supply.reference_tolerance:
        reference += f" +-{supply.reference_tolerance:.3%}".replace(".000%", " %")
    where = ", ".join(str(condition) for condition in conditions)
    return f"Evaluated in {where}, each at {', '.join(levels)}; reference current {reference}."


def list_cautions(
    conditions: Sequence[Condition],
    matching: Mapping[str, Matching],
    *,
    has_passives: bool = True,
) -> tuple[str, ...]:
    """List the cautions of a sheet: the usual ones, and those of this request.

    Parameters
    ----------
    conditions : sequence of Condition
        In which everything was evaluated.
    matching : mapping of str to Matching
        By device.
    has_passives : bool
        Whether resistors and capacitors were described, where there are any in a filter.

    Returns
    -------
    tuple of str
        Sentences.

    Examples
    --------
    >>> len(list_cautions([Condition("tt", 27.0)], {})) - len(CAUTIONS)
    2
    """
    found = list(CAUTIONS)
    missing = find_missing_extremes(conditions)
    if missing:
        found.append(
            f"The conditions do not cover {', '.join(missing)}: the worst case may lie outside."
        )
    if not matching:
        found.append(
            "No [matching] was given: offset, and rejection of what is common, are not judged."
        )
    if not has_passives:
        found.append(
            "No [passives] was given: resistors and capacitors of the filter are ideal here, "
            "without spread, parasitics or units."
        )
    return tuple(found)


def list_provenance(table: Path, digest: str, source: str) -> tuple[tuple[str, str], ...]:
    """List where the numbers of a sheet come from.

    Parameters
    ----------
    table : Path
        The table file.
    digest : str
        Of its data.
    source : str
        Name of the request or the plan.

    Returns
    -------
    tuple of (str, str)
        What, and which.

    Examples
    --------
    >>> [what for what, _ in list_provenance(Path("a.h5"), "0" * 64, "request.toml")]
    ['table', 'digest of the table', 'request or plan', 'version of gmid']
    """
    from importlib.metadata import version

    return (
        ("table", table.name),
        ("digest of the table", digest),
        ("request or plan", Path(source).name),
        ("version of gmid", version("gmid")),
    )


def find_missing_extremes(conditions: Sequence[Condition]) -> list[str]:
    """Find which of slow-cold, slow-hot, fast-cold and fast-hot no condition covers.

    Parameters
    ----------
    conditions : sequence of Condition
        Corners named by their first letter, s for slow and f for fast, as is common practice.

    Returns
    -------
    list of str
        Names of those that lack.

    Examples
    --------
    >>> find_missing_extremes([Condition("ss", -40.0), Condition("ff", 125.0)])
    ['slow-hot', 'fast-cold']
    """
    missing = []
    for word, corner in (("slow", "ss"), ("fast", "ff")):
        found = [one.temperature for one in conditions if one.corner.lower().startswith(corner)]
        if not any(value <= 0 for value in found):
            missing.append(f"{word}-cold")
        if not any(value >= 85 for value in found):
            missing.append(f"{word}-hot")
    return missing
