"""What sizing gives: `Sizing`, and the files it becomes."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from gmid.amplifier.plan import AmplifierPlan
from gmid.request.plans import write_plan
from gmid.request.request import Request
from gmid.sheet.amplifiers import Reviewed
from gmid.sheet.data import Sheet


@dataclass(frozen=True, eq=False)
class Sizing:
    """What sizing gives.

    Parameters
    ----------
    request : Request
        What was asked.
    plans : tuple of AmplifierPlan
        Every distinct amplifier.
    reviews : tuple of Reviewed
        Each in every condition.
    sheet : Sheet
        For the design review, figures included.
    digest : str
        Of the table.
    netlists : mapping of str to str
        Text by file name.

    Examples
    --------
    >>> Sizing.__dataclass_fields__["sheet"].name
    'sheet'
    """

    request: Request
    plans: tuple[AmplifierPlan, ...]
    reviews: tuple[Reviewed, ...]
    sheet: Sheet
    digest: str
    netlists: Mapping[str, str] = field(default_factory=dict)

    @property
    def is_met(self) -> bool:
        """Whether every check holds."""
        return self.sheet.is_met

    def files(self, folder: str | Path) -> dict[str, str]:
        """Write everything that goes to a directory.

        Parameters
        ----------
        folder : str or Path
            The directory, for paths in the plan.

        Returns
        -------
        dict of str to str
            Text by file name.
        """
        from gmid.sheet.html import write_html
        from gmid.sheet.markdown import write_markdown
        from gmid.sheet.outline import lay_out

        blocks = lay_out(self.sheet)
        data = json.dumps(self.sheet.to_json(), indent=1, allow_nan=False)
        return {
            "sheet.html": write_html(blocks, self.sheet.figures, title=self.sheet.title),
            "sheet.md": write_markdown(blocks),
            "sheet.json": data + "\n",
            "plan.toml": write_plan(self.request, self.plans, folder, digest=self.digest),
            **{f"{name}.svg": text for name, text in self.sheet.figures.items()},
            **self.netlists,
        }

    def __repr__(self) -> str:
        return f"Sizing({self.sheet!r})"

    def _repr_html_(self) -> str:
        return self.sheet._repr_html_()
