"""Conditions: process corner, temperature and, where a circuit is meant, supply voltage."""

from __future__ import annotations

import re
from dataclasses import dataclass

from gmid.errors import DataFault

BOLTZMANN = 1.380649e-23
"""Boltzmann constant [J/K], exact (CODATA 2018)."""

ELEMENTARY_CHARGE = 1.602176634e-19
"""Elementary charge [C], exact (CODATA 2018)."""

_CORNER = re.compile(r"[A-Za-z][A-Za-z0-9_.+-]*")


@dataclass(frozen=True, order=True)
class Condition:
    """A process corner at a temperature, and a supply voltage where one applies.

    Parameters
    ----------
    corner : str
        Name of the process corner, such as ``tt``.
    temperature : float
        In degrees Celsius, as the trade writes it.
    supply : float, optional
        Supply voltage [V].

    Raises
    ------
    DataFault
        If the corner's name could not stand in a file or a path, or the temperature lies at
        or below absolute zero.

    Examples
    --------
    >>> Condition("ss", 125.0, 1.62)
    Condition('ss/125/1.62')
    >>> Condition.parse("tt/27").temperature
    27.0
    """

    corner: str
    temperature: float
    supply: float | None = None

    def __post_init__(self) -> None:
        if _CORNER.fullmatch(self.corner) is None:
            raise DataFault(
                f"{self.corner!r} cannot name a corner.",
                hint="Use letters, digits and _ . + -, starting with a letter.",
            )
        if not -273.15 < self.temperature < 1000:
            raise DataFault(
                f"a temperature of {self.temperature:g} C is not plausible.",
                hint="Give it in degrees Celsius, or in kelvin as '300 K'.",
            )

    @classmethod
    def parse(cls, text: str, *, where: str | None = None) -> Condition:
        """Read ``corner/temperature`` or ``corner/temperature/supply``.

        Parameters
        ----------
        text : str
            Such as ``"tt/27"`` or ``"ss/125/1.62"``.
        where : str, optional
            Place for error messages.

        Returns
        -------
        Condition
            The condition read.

        Raises
        ------
        DataFault
            If the text does not have that form.

        Examples
        --------
        >>> Condition.parse("ff/-40").corner
        'ff'
        """
        parts = text.strip().split("/")
        try:
            if len(parts) not in (2, 3):
                raise ValueError
            numbers = [float(part) for part in parts[1:]]
        except ValueError:
            raise DataFault(
                f"{text!r} is not a condition.",
                where=where,
                hint="Write corner/temperature, such as tt/27 (degrees Celsius).",
            ) from None
        return cls(parts[0], numbers[0], numbers[1] if len(numbers) == 2 else None)

    @property
    def kelvin(self) -> float:
        """Absolute temperature [K]."""
        return self.temperature + 273.15

    @property
    def thermal_voltage(self) -> float:
        """Thermal voltage kT/q [V]."""
        return BOLTZMANN * self.kelvin / ELEMENTARY_CHARGE

    def with_supply(self, supply: float | None) -> Condition:
        """Return the same corner and temperature at another supply voltage [V].

        Parameters
        ----------
        supply : float or None
            Supply voltage [V]; None leaves it out.

        Returns
        -------
        Condition
            The new condition.

        Examples
        --------
        >>> Condition("tt", 27.0).with_supply(1.8)
        Condition('tt/27/1.8')
        """
        return Condition(self.corner, self.temperature, supply)

    def __str__(self) -> str:
        text = f"{self.corner}/{self.temperature:.10g}"
        return text if self.supply is None else f"{text}/{self.supply:.4g}"

    def __repr__(self) -> str:
        return f"Condition('{self}')"
