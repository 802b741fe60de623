"""From a filter to what each of its amplifiers must meet."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import partial

import numpy as np

from gmid.errors import DataFault, NoSolution, UsageFault
from gmid.filters.common_mode import find_common_mode_limit, is_stable
from gmid.filters.demand_budget import (
    Budget,
    advise_meaning,
    find_bands,
    make_budget,
    make_yardsticks,
)
from gmid.filters.demand_correct import find_corrected
from gmid.filters.demand_family import Family, make_family
from gmid.filters.demand_loads import Load, find_loads
from gmid.filters.demand_margins import find_margins, raise_poles
from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.filters.demand_search import Plane, Point, choose_gain
from gmid.filters.demand_shifts import find_shifts
from gmid.filters.demand_signals import Signals, find_harmonic, find_signals, share_noise
from gmid.filters.demand_texts import Findings, make_demands
from gmid.filters.demand_types import FilterDemands, TradeOff
from gmid.filters.deviation import MEANINGS
from gmid.filters.distortion import WEAK_INVERSION
from gmid.filters.elements import AmplifierModel
from gmid.filters.impedance import choose_capacitor
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.search import Boundary
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.filters.spec_checks import name_key
from gmid.network import find_poles
from gmid.network.pencil import FloatArray

Split = str | Mapping[str, float]
"""One of `SPLITS`, or the proportions of gm_total by position."""

SPLITS = ("each", "alike")
"""Whether every amplifier has its own gm_total, or all the same."""

_START = 50.0
_RETRIES = 8


def demands_of(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives | None = None, *,
    realisation: Realisation | None = None, intrinsic_gain: float | None = None,
    phase_margin: float = 60.0, split: Split = "each",
    own: AmplifierModel | Mapping[str, AmplifierModel] | None = None, noise_factor: float = 5.0,
    temperature: float = 27.0, tuning_bits: int | None = None, mismatch: float = 0.0,
    divisor: float = WEAK_INVERSION, amplifier_spread: float = 0.1,
) -> FilterDemands:  # fmt: skip
    """Find what each amplifier of a filter must meet.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        How far it may be off, and what counts.
    passives : Passives, optional
        What the elements are like; ideal by default.
    realisation : Realisation, optional
        Sections and elements already chosen; by default `choose_capacitor` chooses them, with
        the noise of the amplifiers counted.
    intrinsic_gain : float, optional
        gm over own output conductance of the amplifiers [-]; by default where bandwidth costs a
        tenth more than with infinite gain.
    phase_margin : float
        Of each amplifier's own loop [deg].
    split : str or mapping of str to float
        ``each``: error split for the least sum of gm_total; ``alike``: one gm_total for all; a
        mapping: gm_total in these proportions, by position.
    own : AmplifierModel or mapping of str to AmplifierModel, optional
        Own input and output capacitances of the amplifiers, as far as they are known.
    noise_factor : float
        Of the amplifiers while the capacitor is chosen [-].
    temperature : float
        At which noise counts [degC].
    tuning_bits : int, optional
        Bits of the tuning bank, see `make_budget`.
    mismatch : float
        Standard deviation of each element, relative [-].
    divisor : float
        d of the cubic term of the amplifiers, see `gmid.filters.distortion` [-].
    amplifier_spread : float
        Of gm and loss either way, where elements are corrected for the nominal amplifier; it
        takes a bias that tracks the resistors [-].

    Returns
    -------
    FilterDemands
        Demands, trade-off, shifts and all that explains them.

    Raises
    ------
    NoSolution
        If no amplifier can meet the tolerance, or the intrinsic gain asked for is too small; the
        hint says which meaning or how much tolerance would make it possible.
    DataFault
        If the filter cannot be realised.

    Examples
    --------
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> bool(0.97 < found.point.dense <= 1.0)
    True
    """
    if isinstance(split, str) and split not in SPLITS:
        raise UsageFault(f"split = {split!r}?", hint=f"Choose {' or '.join(SPLITS)}.")
    given = passives or Passives()
    known: Family | None = None
    if realisation is None:
        realisation, known = _choose_level(
            spec, tolerance, given, split=split, phase_margin=phase_margin,
            noise_factor=noise_factor, temperature=temperature, own=own,
        )  # fmt: skip
    budget = make_budget(
        spec, tolerance, given, realisation, tuning_bits=tuning_bits, mismatch=mismatch
    )
    search = _Search(spec, tolerance, given, realisation, budget, phase_margin, own)
    search.refuse_impossible()
    family = search.weight(split) if known is None else search.adopt(known)
    boundary = search.plane.trace(family, search.guess)
    point, margins = search.find_point(family, boundary, intrinsic_gain)
    if spec.correct_elements == "nominal":
        point, margins = search.correct(point, amplifier_spread)
    return _finish(
        search, point, boundary, margins, is_gain_given=intrinsic_gain is not None,
        temperature=temperature, divisor=divisor,
    )  # fmt: skip


def _choose_level(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives, *, split: Split,
    phase_margin: float, noise_factor: float, temperature: float,
    own: AmplifierModel | Mapping[str, AmplifierModel] | None,
) -> tuple[Realisation, Family | None]:  # fmt: skip
    """Choose the capacitor with the noise of the amplifiers that this capacitor needs."""
    spread = passives.resistor_spread
    scale = np.array([1.0, 1.0 - spread, 1.0 + spread]) if spread else np.ones(1)
    choose = partial(
        choose_capacitor, spec, passives=passives, temperature=temperature, rscale=scale,
        cscale=1.0 / scale,
    )  # fmt: skip
    if spec.style == "gm-c":
        return choose(amplifiers=AmplifierModel(noise_factor=noise_factor)).realisation, None
    first = choose().realisation
    if spec.capacitor is not None or spec.snr_db is None:
        return first, None
    budget = make_budget(spec, tolerance, passives, first)
    search = _Search(spec, tolerance, passives, first, budget, phase_margin, own)
    search.refuse_impossible()
    family = search.weight(split)
    # about what infinite gain needs and a tenth more
    gms = 1.1 / family.at(search.plane.find_reach(family, search.guess), 0.0).gm

    def scaled(made: Realisation) -> dict[str, AmplifierModel]:
        # gm goes with the capacitor
        return {
            place.name: AmplifierModel(
                gm_total=gm * made.capacitor / first.capacitor, noise_factor=noise_factor
            )
            for place, gm in zip(made.amplifiers, gms, strict=True)
        }

    return choose(amplifiers=scaled).realisation, family


class _Search:
    """One filter at one impedance level, ready to be searched."""

    def __init__(
        self, spec: FilterSpec, tolerance: Tolerance, passives: Passives,
        realisation: Realisation, budget: Budget, phase_margin: float,
        own: AmplifierModel | Mapping[str, AmplifierModel] | None,
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
        return Reciprocals(*self.family.at(0.0, 0.0).__dict__.values())

    @property
    def family(self) -> Family:
        gms = None
        if self.realisation.style == "gm-c":
            found = [place.element for place in self.realisation.amplifiers]
            gms = [self.realisation.find(str(name)).value for name in found]
        return make_family(gms, self.loads, self.phase_margin)

    def refuse_impossible(self) -> None:
        """Refuse a filter whose ideal amplifiers already break the tolerance."""
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
        """Weight the amplifiers to the least sum of gm_total, or leave them alike."""
        if isinstance(split, str):
            return self.plane.split(self.family, self.guess) if split == "each" else self.family
        shares = np.array([split[place.name] for place in self.realisation.amplifiers])
        return self.family.weighted(shares.max() / shares)

    def adopt(self, known: Family) -> Family:
        """Take over the weights found at another impedance level, which leaves them alone."""
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
        """Find the demand, with poles raised where a loop would lack phase margin."""
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
        """Correct the elements for the nominal amplifier and find the least amplifiers anew."""
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


def _finish(
    search: _Search, point: Point, boundary: Boundary, margins: FloatArray, *,
    is_gain_given: bool, temperature: float, divisor: float,
) -> FilterDemands:  # fmt: skip
    spec, made, ports = search.spec, search.realisation, search.plane.ports[0]
    real = point.amplifiers
    models = dict(zip([p.name for p in made.amplifiers], real.models(), strict=True))
    signals: Signals | None = None
    harmonic, drive = None, 1.0
    if spec.swing is not None:
        top = 10.0 * find_bands(spec, search.tolerance)[0][1]
        if spec.kind == "highpass":
            top *= 0.1
        signals = find_signals(made, ports, spec.swing, real, top)
        harmonic, drive = find_harmonic(spec, ports, real, signals, divisor=divisor)
    noise = share_noise(spec, made, models, temperature=temperature)
    alone = [
        float(search.plane.measure(real.only(k, keep_gm=point.family.is_fixed)))
        for k in range(len(models))
    ]
    found = Findings(
        spec=spec, tolerance=search.tolerance, budget=search.budget, realisation=made,
        loads=search.loads, point=point, shares=np.array(alone),
        least_gain=float(1.0 / boundary.v[-1]), is_gain_given=is_gain_given,
        phase_margin=search.phase_margin, margins=margins,
        common_mode=find_common_mode_limit(made), signals=signals, drive=drive, noise=noise,
        temperature=temperature,
    )  # fmt: skip
    return FilterDemands(
        spec=spec, tolerance=search.tolerance, realisation=made, budget=search.budget,
        demands=make_demands(found), point=point, trade_off=_trade(boundary, point, search.loads),
        shifts=find_shifts(made, models, search.loads), common_mode=found.common_mode,
        noise=None if noise is None or not noise.passive.shares else noise.passive,
        harmonic=harmonic, plane=search.plane,
    )  # fmt: skip


def _trade(boundary: Boundary, point: Point, loads: tuple[Load, ...]) -> TradeOff:
    """Turn the boundary into gain against bandwidth, scaled so that it meets the exact point."""
    family = point.family
    kept = boundary.u > 0
    u, v = boundary.u[kept], boundary.v[kept]
    u = u * point.u / np.interp(point.v, v, u)
    with np.errstate(divide="ignore"):
        gain = 1.0 / v
    if family.is_fixed:
        sums = np.mean(1.0 / family.lag) / u / (2 * np.pi)
        bandwidth, chosen = sums, float(np.mean(1.0 / family.lag) / point.u / (2 * np.pi))
    else:
        size = np.array([load.accuracy_capacitance for load in loads])
        sums, chosen = np.sum(1.0 / family.gm) / u, float(np.sum(1.0 / family.gm) / point.u)
        bandwidth = np.mean(1.0 / family.gm / size) / u / (2 * np.pi)
    return TradeOff(
        gain, np.asarray(sums), np.asarray(bandwidth), float(1.0 / boundary.v[-1]),
        (1.0 / point.v, chosen),
    )  # fmt: skip
