"""The audit of imports in words and figures, as ``gmid import`` and ``gmid show`` tell it."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gmid.cli.output import make_progress, say

if TYPE_CHECKING:
    from gmid.sweep.coverage import Coverage
    from gmid.sweep.model import Sweep

_COUNT = re.compile(r"(?<![\w.])\d+(?= (?:of \d+ )?(?:bias )?points?\b| row)")


def audit_rows(sweeps: Iterable[Sweep]) -> list[dict[str, Any]]:
    """List the audit of sweeps, one row a note.

    Parameters
    ----------
    sweeps : iterable of Sweep
        With their provenance.

    Returns
    -------
    list of dict
        With ``device corner temperature level note``.

    Examples
    --------
    >>> audit_rows([])
    []
    """
    return [
        {
            "device": sweep.device,
            "corner": sweep.condition.corner,
            "temperature": sweep.condition.temperature,
            "level": level,
            "note": text,
        }
        for sweep in sweeps
        for level, text in sweep.provenance.get("audit", [])
    ]


def merge_notes(rows: Sequence[dict[str, Any]]) -> list[dict[str, str]]:
    """Tell a note that many conditions share once, so that the audit keeps to a page.

    Parameters
    ----------
    rows : sequence of dict
        From `audit_rows`.

    Returns
    -------
    list of dict
        With ``device conditions audit note``; counts of points that differ are told from the
        least to the largest.

    Examples
    --------
    >>> row = {"device": "n", "corner": "tt", "temperature": 27.0, "level": "doubtful"}
    >>> both = [row | {"note": "odd at 7 points."},
    ...         row | {"temperature": 125.0, "note": "odd at 9 points."}]
    >>> merge_notes(both)[0]["note"]
    'odd at 7 to 9 points.'
    """
    shared: dict[tuple[str, str, str], list[tuple[str, str]]] = {}
    for row in rows:
        where = f"{row['corner']}/{row['temperature']:g}"
        key = row["device"], row["level"], _COUNT.sub("#", row["note"])
        shared.setdefault(key, []).append((where, row["note"]))
    return [
        {
            "device": device,
            "conditions": " ".join(dict.fromkeys(where for where, _ in found)),
            "audit": level,
            "note": _span([note for _, note in found]),
        }
        for (device, level, _), found in shared.items()
    ]


def write_import_figures(
    folder: Path, sweeps: Sequence[Sweep], coverages: Sequence[Coverage] = (), *, force: bool
) -> None:
    """Draw the figures of an import into a folder, all of them or none.

    Parameters
    ----------
    folder : Path
        Made if it is not there.
    sweeps : sequence of Sweep
        For gm against the slope of the current.
    coverages : sequence of Coverage
        For the maps of missing points.
    force : bool, keyword-only
        Replace figures that are there.

    Raises
    ------
    FileTrouble
        If a file is there already, or cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> from gmid.device.example import example_sweep
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_import_figures(Path(folder), [example_sweep()], force=False)
    ...     [file.name for file in Path(folder).iterdir()]
    ['gm_nmos_tt_27.svg']
    """
    from gmid.files import make_directory, write_together
    from gmid.sheet.import_figures import draw_import_figures

    drawn = draw_import_figures(sweeps, coverages, progress=make_progress())
    make_directory(folder)
    write_together({folder / f"{name}.svg": data for name, data in drawn.items()}, force=force)
    maps = sum(1 for coverage in coverages if coverage.count)
    whole = " No grid lacks a point, so there is no map of missing ones."
    say(
        f"{folder}: {len(drawn)} figure(s) written."
        f"{whole if coverages and not maps else f' {maps} of missing points.' if maps else ''}"
    )


def _span(notes: Sequence[str]) -> str:
    """Put the least and the largest in place of each count in notes that else agree."""
    counts = zip(*([int(text) for text in _COUNT.findall(note)] for note in notes), strict=True)
    spans = iter([f"{min(c)} to {max(c)}" if min(c) < max(c) else str(c[0]) for c in counts])
    return _COUNT.sub(lambda _: next(spans), notes[0])
