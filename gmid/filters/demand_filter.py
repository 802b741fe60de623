"""One filter at one impedance level, searched for the least amplifiers that keep its tolerance."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from gmid.errors import DataFault, NoSolution
from gmid.filters.common_mode import is_stable
from gmid.filters.demand_budget import (
    Budget,
    advise_meaning,
    find_bands,
    make_yardsticks,
)
from gmid.filters.demand_correct import find_corrected
from gmid.filters.demand_family import Family, make_family
from gmid.filters.demand_loads import Load, find_loads
from gmid.filters.demand_margins import find_margins, raise_poles
from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.filters.demand_search import Plane, Point, choose_gain
from gmid.filters.deviation import MEANINGS
from gmid.filters.elements import AmplifierModel
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.search import Boundary
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.filters.spec_checks import name_key
from gmid.network import find_poles
from gmid.network.pencil import FloatArray

Split = str | Mapping[str, float]
"""``each``, ``alike``, or the proportions of gm_total by position."""

Own = AmplifierModel | Mapping[str, AmplifierModel]
"""Own capacitances of the amplifiers, of all alike or by position."""

_START = 50.0
_RETRIES = 8


class Search:
    """One filter at one impedance level, ready to be searched.

    Parameters
    ----------
    spec, tolerance, passives
        The filter, how far it may be off, and what its elements are like.
    realisation : Realisation
        Sections and elements.
    budget : Budget
        What the amplifiers may use of the tolerance.
    phase_margin : float
        Of each amplifier's own loop [deg].
    own : AmplifierModel or mapping of str to AmplifierModel, optional
        Own capacitances of the amplifiers.

    Examples
    --------
    >>> from gmid.filters import realise
    >>> from gmid.filters.demand_budget import make_budget
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, capacitor=2e-12)
    >>> made, tolerance = realise(spec, capacitor=2e-12), Tolerance(passband_db=0.2)
    >>> budget = make_budget(spec, tolerance, Passives(), made)
    >>> Search(spec, tolerance, Passives(), made, budget, 60.0, None).scales
    (1.0,)
    """

    def __init__(
        self, spec: FilterSpec, tolerance: Tolerance, passives: Passives,
        realisation: Realisation, budget: Budget, phase_margin: float,
        own: Own | None,
    ) -> None:  # fmt: skip
        self.spec, self.tolerance, self.realisation = spec, tolerance, realisation
        self.budget, self.phase_margin = budget, phase_margin
        names = [place.name for place in realisation.amplifiers]
        self.own = dict.fromkeys(names, own) if isinstance(own, AmplifierModel) else own or {}
        self.loads: tuple[Load, ...] = find_loads(realisation, self.own)
        spread = passives.resistor_spread if realisation.style == "active-rc" else 0.0
        # the bank makes up for the resistors, so low R stands with high C and the reverse
        self.scales = (1.0, 1.0 - spread, 1.0 + spread) if spread else (1.0,)
        ports = [
            Ports(realisation, rscale=r, cscale=1.0 / r, parasitics=self.own) for r in self.scales
        ]
        self.plane = Plane(ports, *make_yardsticks(spec, tolerance, budget.usable_db))

    @property
    def ideal(self) -> Reciprocals:
        """Amplifiers without any flaw but those of gm-c elements."""
        return Reciprocals(*self.family.at(0.0, 0.0).__dict__.values())

    @property
    def family(self) -> Family:
        """All amplifiers alike, with poles that follow the wanted phase margin."""
        gms = None
        if self.realisation.style == "gm-c":
            found = [place.element for place in self.realisation.amplifiers]
            gms = [self.realisation.find(str(name)).value for name in found]
        return make_family(gms, self.loads, self.phase_margin)

    def refuse_impossible(self) -> None:
        """Refuse a filter whose ideal amplifiers already break the tolerance.

        Raises
        ------
        NoSolution
            If they do; the hint says what would help.
        """
        used = self._use_ideal(self.tolerance)
        if used < 1.0:
            return
        others = {
            counts: self._use_ideal(replace(self.tolerance, counts=counts)) for counts in MEANINGS
        }
        raise NoSolution(
            f"with ideal amplifiers the filter already uses {100 * used:.4g} % of the tolerance "
            f"({self.budget.describe()}), by its rounded elements, parasitics and source or load.",
            where="tolerance.passband", hint=advise_meaning(self.spec, self.tolerance, others),
        )  # fmt: skip

    def _use_ideal(self, tolerance: Tolerance) -> float:
        fine = make_yardsticks(self.spec, tolerance, self.budget.usable_db)[1]
        ideal = self.ideal
        return max(
            float(fine.confirm(lambda f, p=ports: p.respond(ideal, f)).usage)  # type: ignore[misc]
            for ports in self.plane.ports
        )

    def weight(self, split: Split) -> Family:
        """Weight the amplifiers to the least sum of gm_total, or leave them alike.

        Parameters
        ----------
        split : str or mapping of str to float
            See `gmid.filters.demand.demands_of`.

        Returns
        -------
        Family
            The weighted one.
        """
        if isinstance(split, str):
            return self.plane.split(self.family, self.guess) if split == "each" else self.family
        shares = np.array([split[place.name] for place in self.realisation.amplifiers])
        return self.family.weighted(shares.max() / shares)

    def adopt(self, known: Family) -> Family:
        """Take over the weights found at another impedance level, which leaves them alone.

        Parameters
        ----------
        known : Family
            Of the other level.

        Returns
        -------
        Family
            Of this one.
        """
        family = self.family
        return family if family.is_fixed else family.weighted(known.gm / family.gm)

    @property
    def guess(self) -> float:
        """A 1/u from which to begin: amplifiers fifty times as fast as the filter."""
        top = _START * 2 * np.pi * find_bands(self.spec, self.tolerance)[0][1]
        if self.realisation.style == "gm-c":
            return float(top)
        return float(top * max(load.accuracy_capacitance / load.beta for load in self.loads))

    def find_point(
        self, family: Family, boundary: Boundary, intrinsic_gain: float | None
    ) -> tuple[Point, FloatArray]:
        """Find the demand, with poles raised where a loop would lack phase margin.

        Parameters
        ----------
        family : Family
            The amplifiers.
        boundary : Boundary
            Of the allowed region.
        intrinsic_gain : float, optional
            Asked for [-].

        Returns
        -------
        point : Point
            The least amplifiers, confirmed.
        margins : ndarray of float, shape (K,)
            Phase margins of their loops [deg].
        """
        v = choose_gain(boundary) if intrinsic_gain is None else 1.0 / intrinsic_gain
        point = self._find_scale(family, v, 1.0 / boundary.u[0], intrinsic_gain is not None)
        if self.realisation.style == "gm-c":
            return self._refuse_unstable(point), np.full(len(self.loads), np.nan)
        raised = raise_poles(self.plane.ports[0], point, self.loads, self.phase_margin)
        if raised is not None:
            point = self._find_scale(raised, point.v, 1.0 / point.u, intrinsic_gain is not None)
        margins = find_margins(self.plane.ports[0], point.amplifiers, self.loads)
        return self._refuse_unstable(point), margins

    def _find_scale(self, family: Family, v: float, guess: float, is_given: bool) -> Point:
        for _ in range(_RETRIES):
            try:
                return self.plane.find_scale(family, v, guess)
            except NoSolution:
                if is_given:
                    raise
                # the coarse boundary was too hopeful about gain: take more of it
                v, guess = v / 1.5, 1.2 * guess
        return self.plane.find_scale(family, v, guess)

    def correct(self, point: Point, spread: float) -> tuple[Point, FloatArray]:
        """Correct the elements for the nominal amplifier and find the least amplifiers anew.

        Parameters
        ----------
        point : Point
            Amplifiers to begin with.
        spread : float
            Of gm and loss either way [-].

        Returns
        -------
        point : Point
            The least amplifiers.
        margins : ndarray of float, shape (K,)
            Phase margins of their loops [deg].

        Raises
        ------
        DataFault
            If the filter is not active-RC.
        """
        if self.realisation.style != "active-rc":
            raise DataFault(
                "elements are corrected in active-RC filters only.",
                where=name_key("correct_elements"), hint='Use correct_elements = "none".',
            )  # fmt: skip
        low, high = self.plane.fine.passband
        reference = {"lowpass": low, "highpass": high}.get(self.spec.kind, (low * high) ** 0.5)
        found = find_corrected(
            self.realisation, point.family, point, (self.plane.fine, self.plane.dense),
            scales=self.scales, parasitics=self.own, reference=reference, spread=spread,
        )  # fmt: skip
        self.realisation = found.realisation
        self.loads = find_loads(found.realisation, self.own)
        self.plane = Plane(found.ports, self.plane.coarse, self.plane.fine, self.plane.dense)
        margins = find_margins(found.ports[0], found.point.amplifiers, self.loads)
        return self._refuse_unstable(found.point), margins

    def _refuse_unstable(self, point: Point) -> Point:
        real = point.amplifiers.models()
        names = [place.name for place in self.realisation.amplifiers]
        models = {
            name: replace(
                model, output_capacitance=self._own(name).output_capacitance,
                input_capacitance=self._own(name).input_capacitance,
            )
            for name, model in zip(names, real, strict=True)
        }  # fmt: skip
        if not is_stable(find_poles(self.realisation.network(models))):
            raise NoSolution(
                "amplifiers that keep the tolerance would make this filter oscillate.",
                where="amplifier.loop_phase_margin",
                hint="Ask for more phase margin.",
            )
        return point

    def _own(self, name: str) -> AmplifierModel:
        return self.own.get(name, AmplifierModel())
