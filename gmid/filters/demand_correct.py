"""Element values corrected for the nominal amplifier, so that only its corners count.

Poles are put back where the ideal filter has them, with all real amplifiers at work. That saves
much gm_total, but it needs a bias that tracks the resistors, and loop gains become low.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from gmid.errors import NoSolution
from gmid.filters.demand_family import Family, stack_sets
from gmid.filters.demand_ports import Parasitics, Ports, Reciprocals
from gmid.filters.demand_search import Point
from gmid.filters.deviation import Deviation, Yardstick
from gmid.filters.elements import AmplifierModel
from gmid.filters.realisation import Realisation
from gmid.filters.sections import Section, cascade_response
from gmid.network import find_poles, transfer

_TURNS = 12
_CLOSE = 1e-7
_WINDOW = (0.9975, 0.9999)
_ROUNDS = 40
_GROWTH = 1.3


def correct_elements(
    realisation: Realisation, models: Mapping[str, AmplifierModel], *,
    reference: float | None = None,
) -> Realisation:  # fmt: skip
    """Change element values until the real filter has the poles of the ideal one.

    Parameters
    ----------
    realisation : Realisation
        An active-RC filter with its wanted sections.
    models : mapping of str to AmplifierModel
        The nominal amplifiers, without leading axes.
    reference : float, optional
        Frequency at which the gain is set right as well, by the input elements of the first
        section [Hz].

    Returns
    -------
    Realisation
        With other resistors.

    Raises
    ------
    NoSolution
        If a section would need negative damping, or the poles do not settle.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=2, edge=1e6), capacitor=2e-12)
    >>> model = AmplifierModel(gm_total=5e-4, output_conductance=5e-7)
    >>> better = correct_elements(made, {"A1": model, "A2": model})
    >>> pole = find_poles(better.network(model))[0]
    >>> round(float(abs(pole)) / (2e6 * 3.141592653589793), 5)
    1.0
    """
    made = realisation
    for _ in range(_TURNS):
        net = made.network(models)
        poles = find_poles(net)
        values: dict[str, float] = {}
        errors = [
            _correct_section(made, number, section, poles, values)
            for number, section in enumerate(realisation.sections, start=1)
        ]
        if reference is not None:
            real = transfer(net, "vin", made.output, [reference])
            wanted = cascade_response(realisation.sections, np.array([reference]))
            factor = float(np.abs(wanted / real)[0])
            errors.append(abs(factor - 1.0))
            _scale_input(made, factor, values)
        largest = max(errors)
        if largest < _CLOSE:
            return made
        made = made.with_values(values)
    raise NoSolution(
        f"the elements cannot be corrected for these amplifiers: poles still {100 * largest:.2g} % "
        "off.", hint="Ask for better amplifiers.",
    )  # fmt: skip


def _correct_section(
    made: Realisation, number: int, section: Section, poles: np.ndarray, values: dict[str, float]
) -> float:
    """Put new resistors of one section into `values`; return how far its pole is off."""
    wanted = section.poles[np.argmax(section.poles.imag)]
    pole = complex(poles[np.argmin(np.abs(poles - wanted))])
    speed = abs(pole) / section.w0
    here = {e.role: e for e in made.elements if e.section == number and e.kind == "resistor"}
    if section.q is None:
        conductance = 1.0 / here["f"].value
        size = next(e.value for e in made.elements if e.section == number and e.role == "a")
        values[here["f"].name] = 1.0 / _positive(conductance + (section.w0 - abs(pole)) * size)
        return abs(speed - 1.0)
    for role in ("ab", "ba", "in_a", "in_b"):
        if role in here:
            values[here[role].name] = here[role].value * speed
    size = next(
        e.value for e in made.elements
        if e.section == number and e.role == "b" and e.kind == "capacitor"
    )  # fmt: skip
    lack = 1.0 / section.q + 2.0 * pole.real / abs(pole)
    damping = 1.0 / (here["q"].value * speed) + lack * section.w0 * size
    values[here["q"].name] = 1.0 / _positive(damping)
    return max(abs(speed - 1.0), abs(lack))


def _positive(conductance: float) -> float:
    if conductance <= 0:
        raise NoSolution(
            "a section would need negative damping to make up for its amplifiers.",
            hint="Ask for better amplifiers.",
        )
    return conductance


def _scale_input(made: Realisation, factor: float, values: dict[str, float]) -> None:
    """Change the input elements of the first section, in `values`, by a factor of gain."""
    for element in made.elements:
        if element.section == 1 and element.role in ("in_a", "in_b"):
            before = values.get(element.name, element.value)
            change = 1.0 / factor if element.kind == "resistor" else factor
            values[element.name] = before * change


@dataclass(frozen=True, eq=False)
class SpreadFamily(Family):
    """Amplifiers to whose nominal values the elements are corrected.

    Parameters
    ----------
    gm, lag, is_fixed
        As in `Family`.
    spread : float
        By how much gm, pole and output conductance go either way [-].

    Examples
    --------
    >>> one = SpreadFamily(np.array([1e3]), np.array([1e-9]), False, 0.1)
    >>> sorted(one.list_corners(1.0, 0.01))
    ['as asked', 'fast, less loss', 'fast, more loss', 'slow, less loss', 'slow, more loss']
    """

    spread: float = 0.1

    def list_corners(self, u: object, v: object) -> dict[str, Reciprocals]:
        """Return the sets at which the tolerance must be kept, by name.

        Parameters
        ----------
        u, v : float
            The nominal point.

        Returns
        -------
        dict of str to Reciprocals
            As asked, and gm and loss each changed by the spread.
        """
        x, y = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
        more, less = 1.0 + self.spread, 1.0 - self.spread
        return {
            "as asked": self.at(x, y), "slow, more loss": self.at(x / less, y * more),
            "slow, less loss": self.at(x / less, y * less),
            "fast, more loss": self.at(x / more, y * more),
            "fast, less loss": self.at(x / more, y * less),
        }  # fmt: skip


@dataclass(frozen=True, eq=False)
class Corrected:
    """A corrected filter at the least amplifiers, and where it stands.

    Parameters
    ----------
    realisation : Realisation
        With corrected elements.
    ports : tuple of Ports
        Its network in the corners of the resistors.
    point : Point
        The amplifiers.

    Examples
    --------
    >>> Corrected.__dataclass_fields__["ports"].name
    'ports'
    """

    realisation: Realisation
    ports: tuple[Ports, ...]
    point: Point


def find_corrected(
    realisation: Realisation, family: Family, point: Point, sticks: tuple[Yardstick, Yardstick], *,
    scales: tuple[float, ...], parasitics: Parasitics, reference: float, spread: float,
) -> Corrected:  # fmt: skip
    """Find the least amplifiers when elements are corrected for the nominal ones.

    Parameters
    ----------
    realisation : Realisation
        Before correction.
    family : Family
        The amplifiers.
    point : Point
        What they must be without correction: a place to start from.
    sticks : pair of Yardstick
        Fine and dense.
    scales : tuple of float
        Corners of the resistors, nominal first; capacitors are tuned the other way.
    parasitics : mapping of str to AmplifierModel
        Own capacitances of the amplifiers.
    reference : float
        Where the gain is set right [Hz].
    spread : float
        Of gm and loss, either way [-].

    Returns
    -------
    Corrected
        With the usage just below 1.

    Raises
    ------
    NoSolution
        If the spread alone breaks the tolerance.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> tolerance = Tolerance(passband_db=0.2, counts="shape")
    >>> plain = demands_of(spec, tolerance)
    >>> better = demands_of(spec.with_values(correct_elements="nominal"), tolerance)
    >>> better.gm_sum < 0.6 * plain.gm_sum
    True
    """
    wide = SpreadFamily(family.gm, family.lag, family.is_fixed, spread)
    trial = _Trial(realisation, wide, point.v, sticks, scales, parasitics, reference)
    low, high = (0.0, 0.0), None
    u, best = point.u, None
    for _ in range(_ROUNDS):
        used, found = trial.measure(u)
        if used < _WINDOW[1]:
            low, best = (u, used), found
            if used > _WINDOW[0]:
                break
        else:
            high = (u, used)
        if high is not None and high[0] - low[0] < 1e-4 * high[0]:
            break
        u = _next(low, high, u)
    if best is None:
        raise NoSolution(
            f"with amplifiers that spread by {100 * spread:g} % the corrected filter does not keep "
            "the tolerance.", where="filter.correct_elements",
            hint='Use correct_elements = "none", or a bias that tracks the resistors better.',
        )  # fmt: skip
    return best


def _next(low: tuple[float, float], high: tuple[float, float] | None, u: float) -> float:
    if high is None:
        return u * _GROWTH
    if low[0] == 0.0:
        return u / (2.0 * _GROWTH)
    if not np.isfinite(high[1]):
        return 0.5 * (low[0] + high[0])
    share = (np.mean(_WINDOW) - low[1]) / (high[1] - low[1])
    return float(low[0] + (high[0] - low[0]) * np.clip(share, 0.03, 0.97))


@dataclass(frozen=True, eq=False)
class _Trial:
    realisation: Realisation
    family: SpreadFamily
    v: float
    sticks: tuple[Yardstick, Yardstick]
    scales: tuple[float, ...]
    parasitics: Parasitics
    reference: float

    def measure(self, u: float) -> tuple[float, Corrected | None]:
        """Correct the filter for the amplifiers at u and measure it in all corners."""
        names = [place.name for place in self.realisation.amplifiers]
        nominal = self.family.at(u, self.v)
        models = dict(zip(names, nominal.models(), strict=True))
        try:
            made = correct_elements(self.realisation, models, reference=self.reference)
        except NoSolution:
            return np.inf, None
        ports = tuple(
            Ports(made, rscale=r, cscale=1.0 / r, parasitics=self.parasitics) for r in self.scales
        )
        corners = self.family.list_corners(u, self.v)
        sets, listed = stack_sets(corners.values()), list(corners)
        worst: tuple[float, str, Deviation] | None = None
        for one in ports:
            found = self.sticks[0].measure(one.respond(sets, self.sticks[0].frequency))
            k = int(np.argmax(found.usage))
            if worst is None or float(found.usage[k]) > worst[0]:
                worst = float(found.usage[k]), listed[k], found.pick(k)
        assert worst is not None
        asked = [
            self.sticks[1].measure(one.respond(nominal, self.sticks[1].frequency)) for one in ports
        ]
        plain = max(asked, key=lambda entry: float(entry.usage))
        point = Point(u, self.v, self.family, worst[2], worst[1], plain, worst[0])
        return worst[0], Corrected(made, ports, point)
