"""What an amplifier must meet and why: `Requirement`, `Demand`, `FilterDemands`."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from gmid.errors import UnknownName, advise
from gmid.filters.common_mode import CommonModeLimit
from gmid.filters.demand_budget import Budget
from gmid.filters.demand_loads import Load
from gmid.filters.demand_search import Plane, Point
from gmid.filters.distortion import ThirdHarmonic
from gmid.filters.elements import AmplifierModel
from gmid.filters.noise import FilterNoise
from gmid.filters.realisation import Realisation
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.network.pencil import FloatArray

if TYPE_CHECKING:
    from gmid.sweep.listing import DataFrame


@dataclass(frozen=True)
class Requirement:
    """One number that an amplifier must meet.

    Parameters
    ----------
    value : float
        In SI units.
    unit : str
        ``S``, ``Hz``, ``F``, ``ohm``, ``A``, ``V``, ``V/rtHz``, ``deg`` or empty.
    because : str
        The cause in the filter, and the bound that sets it.

    Examples
    --------
    >>> Requirement(1e-3, "S", "the passband tolerance").as_dict()["value"]
    0.001
    """

    value: float
    unit: str
    because: str

    def as_dict(self) -> dict[str, Any]:
        """Return value, unit and because as they stand in a sheet.

        Returns
        -------
        dict
            With the three keys.
        """
        return {"value": self.value, "unit": self.unit, "because": self.because}


@dataclass(frozen=True, eq=False)
class Demand:
    """What the amplifier of one position must meet.

    Parameters
    ----------
    position : str
        ``A1``, ``A2``, ...
    section : int
        Which section it belongs to, from 1.
    load : Load
        What it sees.
    requirements : mapping of str to Requirement
        By name: ``gm_total intrinsic_gain output_conductance excess_pole dc_gain gbw
        accuracy_gbw accuracy_capacitance stability_capacitance load_capacitance
        load_resistance beta phase_margin output_current swing input_noise common_mode_gain``;
        what nothing in the filter asks for is absent.

    Examples
    --------
    >>> one = Demand("A1", 1, Load(position="A1"), {"gm_total": Requirement(1e-3, "S", "why")})
    >>> one["gm_total"].value
    0.001
    """

    position: str
    section: int
    load: Load
    requirements: Mapping[str, Requirement]

    def __getitem__(self, name: str) -> Requirement:
        try:
            return self.requirements[name]
        except KeyError:
            raise UnknownName(
                f"amplifier {self.position} has no demand {name}.",
                hint=advise(name, self.requirements),
            ) from None

    @property
    def model(self) -> AmplifierModel:
        """An amplifier that meets exactly what small signals ask for."""
        return AmplifierModel(
            gm_total=self["gm_total"].value,
            output_conductance=self["output_conductance"].value,
            excess_pole=self["excess_pole"].value,
        )

    def as_dict(self) -> dict[str, dict[str, Any]]:
        """Return all requirements as they stand in a sheet.

        Returns
        -------
        dict
            By name: value, unit, because.
        """
        return {name: one.as_dict() for name, one in self.requirements.items()}

    def __repr__(self) -> str:
        parts = ", ".join(
            f"{name} {one.value:.4g} {one.unit}".rstrip() for name, one in self.requirements.items()
        )
        return f"Demand({self.position}: {parts})"

    def _repr_html_(self) -> str:
        from gmid.filters.demand_listing import list_demand

        return list_demand(self)


@dataclass(frozen=True, eq=False)
class TradeOff:
    """Intrinsic gain against bandwidth: amplifiers that all keep the tolerance.

    Parameters
    ----------
    intrinsic_gain : ndarray of float, shape (n,)
        From infinity downwards [-].
    gm_sum : ndarray of float, shape (n,)
        Sum of gm_total over all amplifiers [S]; of a gm-c filter the mean excess pole [Hz].
    gbw : ndarray of float, shape (n,)
        Mean of gm_total/(2 pi C_acc) [Hz]; of a gm-c filter the mean excess pole.
    least_gain : float
        Intrinsic gain that even infinite bandwidth needs [-].
    chosen : tuple of float
        Intrinsic gain and gm_sum of the demand.

    Examples
    --------
    >>> TradeOff(np.array([np.inf, 1e3]), np.array([1e-3, 2e-3]), np.ones(2), 500.0, (1e3, 2e-3))
    TradeOff(2 points, least gain 500)
    """

    intrinsic_gain: FloatArray
    gm_sum: FloatArray
    gbw: FloatArray
    least_gain: float
    chosen: tuple[float, float]

    def __repr__(self) -> str:
        return f"TradeOff({self.gm_sum.size} points, least gain {self.least_gain:.4g})"


@dataclass(frozen=True)
class SectionShift:
    """What the demanded amplifiers do to one section, exactly and by the closed form.

    Parameters
    ----------
    section : int
        From 1.
    f0, q : float
        As its elements make it [Hz], [-]; q is 0 for a section of first order.
    exact_frequency, closed_frequency : float
        Relative change of f0 [-].
    exact_q, closed_q : float
        Quality factor with real amplifiers; 0 for a section of first order [-].
    is_trusted : bool
        Whether the closed form is within its range.

    Examples
    --------
    >>> SectionShift(1, 1e6, 5.0, -0.01, -0.011, 5.5, 5.6, True).exact_q
    5.5
    """

    section: int
    f0: float
    q: float
    exact_frequency: float
    closed_frequency: float
    exact_q: float
    closed_q: float
    is_trusted: bool


@dataclass(frozen=True, eq=False)
class FilterDemands:
    """A filter and what its amplifiers must meet.

    Parameters
    ----------
    spec : FilterSpec
        What was asked for.
    tolerance : Tolerance
        How far the filter may be off.
    realisation : Realisation
        Sections and elements, corrected where that was asked for.
    budget : Budget
        How the tolerance is shared out.
    demands : tuple of Demand
        In the order of the positions.
    point : Point
        The amplifiers in the plane of reciprocals, and the corner that binds.
    trade_off : TradeOff
        Intrinsic gain against bandwidth.
    shifts : tuple of SectionShift
        One for each section.
    common_mode : CommonModeLimit
        What the common mode allows.
    noise : FilterNoise, optional
        Of the passive elements, where there is a noise band.
    harmonic : ThirdHarmonic, optional
        With amplifiers that deliver exactly the demanded current.
    plane : Plane
        For measuring other amplifiers.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> [one.position for one in found.demands]
    ['A1', 'A2']
    """

    spec: FilterSpec
    tolerance: Tolerance
    realisation: Realisation
    budget: Budget
    demands: tuple[Demand, ...]
    point: Point
    trade_off: TradeOff
    shifts: tuple[SectionShift, ...]
    common_mode: CommonModeLimit
    noise: FilterNoise | None
    harmonic: ThirdHarmonic | None
    plane: Plane

    @property
    def models(self) -> dict[str, AmplifierModel]:
        """Amplifiers that meet exactly what small signals ask for, by position."""
        return {one.position: one.model for one in self.demands}

    @property
    def gm_sum(self) -> float:
        """Sum of gm_total over all amplifiers [S]."""
        return float(np.sum([one["gm_total"].value for one in self.demands]))

    def find(self, position: str) -> Demand:
        """Return the demand on one amplifier.

        Parameters
        ----------
        position : str
            ``A1``, ``A2``, ...

        Returns
        -------
        Demand
            Of that position.

        Raises
        ------
        UnknownName
            If there is no such amplifier.
        """
        for one in self.demands:
            if one.position == position:
                return one
        names = [one.position for one in self.demands]
        raise UnknownName(f"the filter has no amplifier {position}.", hint=advise(position, names))

    def __repr__(self) -> str:
        return (
            f"FilterDemands({len(self.demands)} amplifiers, sum of gm {self.gm_sum:.4g} S, "
            f"bound by {self.point.worst.binding} {self.point.corner})"
        )

    def to_frame(self) -> DataFrame:
        """List every demand of every amplifier as a data frame.

        Returns
        -------
        DataFrame
            Columns ``amplifier section demand value unit because``, SI.
        """
        from gmid.filters.demand_listing import frame_demands

        return frame_demands(self)

    def _repr_html_(self) -> str:
        from gmid.filters.demand_listing import list_demands

        return list_demands(self)
