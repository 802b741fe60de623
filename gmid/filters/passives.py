"""`Passives`: what the resistors and capacitors of a process are like."""

from __future__ import annotations

from dataclasses import dataclass

from gmid.errors import DataFault, GmidError, raise_faults

_POSITIVE = (
    "capacitor_density", "unit_capacitor", "resistor_sheet", "unit_resistor",
)  # fmt: skip
_SPREADS = ("capacitor_spread", "resistor_spread")


@dataclass(frozen=True, kw_only=True)
class Passives:
    """Properties of passive elements; all ideal by default.

    Parameters
    ----------
    capacitor_density : float, optional
        [F/m^2].
    bottom_plate : float
        Capacitance of the bottom plate to ground over that of the capacitor [-].
    capacitor_spread, resistor_spread : float
        Largest relative deviation of all capacitors, of all resistors [-].
    unit_capacitor, unit_resistor : float, optional
        What elements are made of [F], [ohm]; without it any value can be made.
    resistor_sheet : float, optional
        Sheet resistance [ohm].
    resistor_capacitance : float
        Capacitance to ground per resistance, spread along the resistor [F/ohm].

    Raises
    ------
    Faults
        If a value cannot be; `where` is the key.

    Examples
    --------
    >>> Passives(unit_capacitor=100e-15).bottom_plate
    0.0
    """

    capacitor_density: float | None = None
    bottom_plate: float = 0.0
    capacitor_spread: float = 0.0
    unit_capacitor: float | None = None
    resistor_sheet: float | None = None
    resistor_capacitance: float = 0.0
    resistor_spread: float = 0.0
    unit_resistor: float | None = None

    def __post_init__(self) -> None:
        faults: list[GmidError] = []
        for key in _POSITIVE:
            value = getattr(self, key)
            if value is not None and not 0 < value < float("inf"):
                faults.append(
                    DataFault(f"{key} is positive, found {value:g}.", where=f"passives.{key}")
                )
        for key in ("bottom_plate", "resistor_capacitance", *_SPREADS):
            value = getattr(self, key)
            if not 0 <= value < (1.0 if key in _SPREADS else float("inf")):
                limit = " and below 100 %" if key in _SPREADS else ""
                faults.append(
                    DataFault(
                        f"{key} is not negative{limit}, found {value:g}.", where=f"passives.{key}"
                    )
                )
        raise_faults(faults)
