"""A query as typed: one drive, what to scale to, and every combination of the values given."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from gmid.errors import OutOfReach, UsageFault

if TYPE_CHECKING:
    from gmid.device.device import Device
    from gmid.device.operating_point import OperatingPoint
    from gmid.device.spline import Array

DRIVES = ("gm_over_id", "vgs", "current_density", "vdsat")
"""Drives that stand alone; a current takes a count or a width with it."""

SCALES = ("id", "gm", "width", "count")
"""What an answer can be scaled to."""

MOST_COMBINATIONS = 100_000
"""How many rows one query may ask for."""


@dataclass(frozen=True)
class Question:
    """What to ask of each device.

    Parameters
    ----------
    drive : str
        Quantity that sets vgs.
    scale : str or None
        Quantity that sets the number of units.
    diode : bool
        Whether vds is to equal vgs.
    values : mapping of str to list of float
        Of ``length vsb vds drive scale``, in the order in which they vary, the last fastest.

    Examples
    --------
    >>> make_question({"length": [1e-6], "vds": [0.6], "gm_over_id": [10.0, 15.0]})
    Question(drive='gm_over_id', scale=None, diode=False, values={'length': [1e-06], \
'vsb': [0.0], 'vds': [0.6], 'drive': [10.0, 15.0]})
    """

    drive: str
    scale: str | None
    diode: bool
    values: Mapping[str, list[float]]

    @property
    def asked(self) -> tuple[str, ...]:
        """Quantities given, by their names as an answer has them."""
        names = {"drive": self.drive, "scale": self.scale or ""}
        return tuple(names.get(name, name) for name in self.values)

    def combine(self) -> dict[str, Array]:
        """Make every combination.

        Returns
        -------
        dict of str to ndarray, shape (n,)
            A value of each kind for each combination.
        """
        import numpy as np

        mesh = np.meshgrid(*map(np.asarray, self.values.values()), indexing="ij")
        return dict(zip(self.values, (axis.ravel() for axis in mesh), strict=True))

    def ask(self, device: Device, points: Mapping[str, Array]) -> OperatingPoint:
        """Ask a device for some of the combinations.

        Parameters
        ----------
        device : Device
            In one condition.
        points : mapping of str to ndarray, shape (n,)
            As from `combine`.

        Returns
        -------
        OperatingPoint
            Of that shape, scaled.

        Raises
        ------
        OutOfReach
            Naming some of what the table does not cover.
        """
        bias: dict[str, Any] = {"length": points["length"], "vsb": points["vsb"]}
        bias |= {"vds": "diode" if self.diode else points["vds"], self.drive: points["drive"]}
        if self.drive == "id":
            return device.at(**bias, **{str(self.scale): points["scale"]})
        point = device.at(**bias)
        if self.scale is None:
            return point
        _refuse_idle(device, point, self.scale)
        return point.scaled(**{self.scale: points["scale"]})


def make_question(given: Mapping[str, list[float]], *, diode: bool = False) -> Question:
    """Sort what was given into drive, scale and bias.

    Parameters
    ----------
    given : mapping of str to list of float
        Values by name: ``length vds vsb`` and those of `DRIVES` and `SCALES`; vsb is zero
        where it is missing.
    diode : bool, keyword-only
        Whether vds is to equal vgs; `given` then has none.

    Returns
    -------
    Question
        Ready to be asked.

    Raises
    ------
    UsageFault
        If there is not exactly one drive, more than one scale, or too much asked at once.

    Examples
    --------
    >>> make_question({"length": [1e-6], "vds": [0.6], "vgs": [0.5], "id": [1e-5]}).scale
    'id'
    >>> make_question({"length": [1e-6], "vds": [0.6], "id": [1e-5], "count": [4.0]}).drive
    'id'
    """
    drives = [name for name in DRIVES if name in given]
    scales = [name for name in SCALES if name in given]
    if not drives and "id" in scales:
        scales.remove("id")
        if scales not in (["count"], ["width"]):
            raise UsageFault(
                "as a drive, --id needs --count or --width, and nothing else to scale by.",
                hint="Or give another drive, such as --gm-over-id.",
            )
        drives = ["id"]
    if len(drives) != 1:
        raise UsageFault(
            f"a query needs exactly one drive, not {_spell(drives, ' and ') or 'none'}.",
            hint=f"Give one of {_spell(DRIVES, ', ')}, or --id with --count or --width.",
        )
    if len(scales) > 1:
        raise UsageFault(
            f"only one thing can set the size, not {_spell(scales, ' and ')}.",
            hint="Give one of them.",
        )
    for name in scales:
        if min(given[name]) <= 0:
            raise UsageFault(f"--{name} must be positive, not {min(given[name]):g}.")
    values = {"length": given["length"], "vsb": given.get("vsb", [0.0])}
    values |= {} if diode else {"vds": given["vds"]}
    values |= {"drive": given[drives[0]]}
    if scales:
        values["scale"] = given[scales[0]]
    return Question(drives[0], scales[0] if scales else None, diode, _bounded(values))


def _bounded(values: dict[str, list[float]]) -> dict[str, list[float]]:
    total = 1
    for several in values.values():
        total *= len(several)
    if total > MOST_COMBINATIONS:
        raise UsageFault(
            f"{total} combinations are more than the {MOST_COMBINATIONS} that fit in one query.",
            hint="Ask in parts, or from Python.",
        )
    return values


def _spell(names: Sequence[str], between: str) -> str:
    return between.join("--" + name.replace("_", "-") for name in names)


def _refuse_idle(device: Device, point: OperatingPoint, scale: str) -> None:
    """Raise where a unit has nothing of what is to be scaled to."""
    from gmid.quantity import format_quantity

    base = point.read([scale])[scale]
    lines = [
        f"a unit of {device.name} {device.condition} has no {scale} to scale at "
        f"L = {format_quantity(point.length[index], 'm')}, vds = {point.vds[index]:.4g} V, "
        f"vsb = {point.vsb[index]:.4g} V, vgs = {point.vgs[index]:.4g} V."
        for index in (~(base > 0)).nonzero()[0]
    ]
    if lines:
        raise OutOfReach("\n".join(lines), hint="Choose a bias at which it conducts.")


def find_unreachable(device: Device, question: Question) -> list[OutOfReach]:
    """Find everything in a question that a device's table does not cover.

    Parameters
    ----------
    device : Device
        In one condition.
    question : Question
        What was asked.

    Returns
    -------
    list of OutOfReach
        First axis by axis, then combination by combination.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> asked = make_question({"length": [1e-6], "vds": [0.6, 3.0], "gm_over_id": [15.0, 60.0]})
    >>> [str(fault)[:40] for fault in find_unreachable(Device(example_sweep()), asked)]
    ['vds = 3 V is out of reach for nmos tt/27', 'gm/Id = 60 1/V is out of reach for nmos ']
    """
    import numpy as np

    points = question.combine()
    inside = np.ones(points["length"].size, dtype=bool)
    faults = []
    for name, values, fault in _check_axes(device, question):
        inside &= ~np.isin(points[name], values)
        faults.append(fault)
    left = {name: values[inside] for name, values in points.items()}
    return [*faults, *_search(device, question, left)]


def _check_axes(device: Device, question: Question) -> Iterator[tuple[str, float, OutOfReach]]:
    """Try each value of each axis alone, the others lying inside."""
    import numpy as np

    from gmid.device.reach import settle_axes

    sweep = device.sweep
    safe = {name: sweep.axes[name][:1] for name in ("length", "vgs", "vds", "vsb")}
    checks: list[tuple[str, tuple[str, ...]]]
    checks = [(name, (name,)) for name in ("length", "vsb", "vds") if name in question.values]
    if question.drive == "vgs":
        checks.append(("drive", ("vgs", "vds") if question.diode else ("vgs",)))
    for name, axes in checks:
        for value in dict.fromkeys(question.values[name]):
            try:
                settle_axes(sweep, **(safe | dict.fromkeys(axes, np.array([value]))))
            except OutOfReach as fault:
                yield name, value, fault


def _search(
    device: Device, question: Question, points: Mapping[str, Array]
) -> Iterator[OutOfReach]:
    """Halve until every refusal names all that it refuses."""
    from gmid.device.reach import MOST_NAMED

    size = points["length"].size
    if size == 0:
        return
    try:
        question.ask(device, points)
    except OutOfReach as fault:
        if size <= MOST_NAMED:
            yield fault
            return
        for part in (slice(None, size // 2), slice(size // 2, None)):
            yield from _search(device, question, {k: v[part] for k, v in points.items()})


def raise_unreachable(faults: Sequence[OutOfReach]) -> None:
    """Raise all that was found out of reach, each line and each advice once.

    Parameters
    ----------
    faults : sequence of OutOfReach
        Nothing happens without any.

    Raises
    ------
    OutOfReach
        With all of them.

    Examples
    --------
    >>> raise_unreachable([OutOfReach("a.", hint="Less."), OutOfReach("b.", hint="Less.")])
    Traceback (most recent call last):
    ...
    gmid.errors.OutOfReach: a.
    b. Less.
    """
    if faults:
        hints = dict.fromkeys(fault.hint for fault in faults if fault.hint)
        lines = dict.fromkeys(line for fault in faults for line in fault.message.split("\n"))
        raise OutOfReach("\n".join(lines), hint=" ".join(hints) or None)
