"""Filters: from a specification to sections, elements and what each amplifier must meet.

The package knows no transistor.

Examples
--------
>>> from gmid.network import transfer
>>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
>>> made = realise(spec, capacitor=4e-12)
>>> abs(transfer(made.network(), "vin", made.output, [0.0, 400e3])).round(6).tolist()
[1.0, 0.944061]
"""

from __future__ import annotations

from gmid.filters.demand import demands_of
from gmid.filters.demand_check import FilterCheck, check_filter
from gmid.filters.demand_report import ResponseCurve, trace_response
from gmid.filters.demand_types import Demand, FilterDemands, Requirement
from gmid.filters.elements import AmplifierModel, Element, Position
from gmid.filters.impedance import Level, choose_capacitor
from gmid.filters.levels import absorb_parasitics, measure_levels
from gmid.filters.noise import FilterNoise, measure_noise
from gmid.filters.passives import Passives
from gmid.filters.realisation import Amplifiers, Realisation
from gmid.filters.realise import design_sections, realise
from gmid.filters.responses import RationalResponse, find_response
from gmid.filters.rounding import round_elements
from gmid.filters.sections import Section, cascade_response
from gmid.filters.spec import FilterSpec, Tolerance

__all__ = [
    "AmplifierModel",
    "Amplifiers",
    "Demand",
    "Element",
    "FilterCheck",
    "FilterDemands",
    "FilterNoise",
    "FilterSpec",
    "Level",
    "Passives",
    "Position",
    "RationalResponse",
    "Realisation",
    "Requirement",
    "ResponseCurve",
    "Section",
    "Tolerance",
    "absorb_parasitics",
    "cascade_response",
    "check_filter",
    "choose_capacitor",
    "demands_of",
    "design_sections",
    "find_response",
    "measure_levels",
    "measure_noise",
    "realise",
    "round_elements",
    "trace_response",
]
