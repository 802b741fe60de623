"""What no amplifier of a process can do: told before one is searched for."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

import numpy as np

from gmid.amplifier.plan import Requirement, Supply
from gmid.device.device import Device
from gmid.filters.demand_types import TradeOff
from gmid.quantity import format_quantity

EASED_SWING = 0.5
"""Swing, over the largest that there can be, of amplifiers where too much is asked [-]."""

EASED_POLE = 2.0
"""Excess-phase pole, over that of usual mirrors, of amplifiers where too much is asked [-]."""

EASED_GAIN = 50.0
"""Intrinsic gain that is still asked of such amplifiers [dB]."""

EASY_GAIN = 1000.0
"""Intrinsic gain that a fast amplifier can have [-]; common practice."""

_BESIDE = (1.0, 1.12, 0.9, 1.25)
_FINE = 400
_ROOM = 0.2
"""Voltage that pair and tail keep above a diode's; common practice [V]."""

_POINTS = 41


def find_largest_swing(supply: Supply) -> float:
    """Find the swing at which an output reaches a rail.

    Parameters
    ----------
    supply : Supply
        What the amplifier is fed with.

    Returns
    -------
    float
        Peak of the differential output at the lowest supply [V].

    Examples
    --------
    >>> find_largest_swing(Supply(1.8, 2e-6, tolerance=0.1))
    1.62
    """
    voltage = supply.voltages
    level = supply.common_mode.at(voltage)
    return float(np.min(2.0 * np.minimum(level, voltage - level)))


def find_fastest_pole(
    bench: Iterable[tuple[object, Mapping[str, Device]]], roles: Mapping[str, str], supply: Supply
) -> float:
    """Find the excess-phase pole that no mirror of a process exceeds in every condition.

    A mirror's node carries the gates of its diode and of what the diode drives, so that half the
    transit frequency of the shortest diode at the largest gate voltage is beyond it.

    Parameters
    ----------
    bench : iterable of (Condition, mapping of str to Device)
        Conditions and devices.
    roles : mapping of str to str
        Device by role, `n` and `p`.
    supply : Supply
        The lowest counts.

    Returns
    -------
    float
        Of the faster channel in its slowest condition [Hz].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_supply
    >>> roles = {"n": "nmos", "p": "pmos"}
    >>> found = find_fastest_pole([(None, example_devices())], roles, example_supply())
    >>> 1e9 < found < 100e9
    True
    """
    highest = float(np.min(supply.voltages)) - _ROOM
    slowest: dict[str, float] = {}
    for _, devices in bench:
        for role in ("n", "p"):
            device = devices[roles[role]]
            top = min(highest, float(device.sweep.vgs[-1]), float(device.sweep.vds[-1]))
            vgs = np.linspace(0.25 * top, top, _POINTS)
            point = device.at(vgs=vgs, vds=vgs, length=float(device.sweep.length[0]))
            fastest = float(np.max(point.gm / (4 * np.pi * point.cgg)))
            slowest[role] = min(slowest.get(role, np.inf), fastest)
    return max(slowest.values())


def weigh_gain(trade: TradeOff) -> tuple[float, ...]:
    """Weigh gain against bandwidth where a demand would take more than `EASY_GAIN`.

    Parameters
    ----------
    trade : TradeOff
        Of the demand.

    Returns
    -------
    tuple of float
        The gain at which gm_total, times one plus the gain over `EASY_GAIN`, is least, and some
        beside it; nothing where the demand has no more anyway [-].

    Examples
    --------
    >>> gain = np.array([np.inf, 3000.0, 1000.0, 500.0])
    >>> trade = TradeOff(gain, np.array([1.0, 1.2, 1.4, 3.0]), np.ones(4), 300.0, (7e3, 1.1))
    >>> round(weigh_gain(trade)[0], -1)
    1000.0
    """
    if trade.chosen[0] <= EASY_GAIN:
        return ()
    place = np.linspace(0.0, trade.gm_sum.size - 1.0, _FINE)[1:]
    rows = np.arange(trade.gm_sum.size)
    gain = 1.0 / np.interp(place, rows, 1.0 / trade.intrinsic_gain)
    gm = np.interp(place, rows, trade.gm_sum)
    # where bandwidth falls with the gain, more gain alone would break the tolerance
    clear = (gm >= np.maximum.accumulate(gm)) & (gain < trade.chosen[0])
    price = np.where(clear, (1.0 + gain / EASY_GAIN) * gm, np.inf)
    k = int(np.argmin(price))
    return tuple(float(gain[k]) * one for one in _BESIDE) if np.isfinite(price[k]) else ()


def ease_demands(asked: Mapping[str, Requirement], share: float) -> dict[str, Requirement]:
    """Ease demands on an amplifier that is to be only so fast.

    Parameters
    ----------
    asked : mapping of str to Requirement
        What would be needed.
    share : float
        Speed over what would be needed [-].

    Returns
    -------
    dict of str to Requirement
        gm_total and excess-phase pole times the share, and what follows from them.

    Examples
    --------
    >>> asked = {"gm_total": Requirement(1.0), "dc_gain": Requirement(60.0)}
    >>> {name: round(one.value, 6) for name, one in ease_demands(asked, 0.1).items()}
    {'gm_total': 0.1, 'dc_gain': 40.0}
    """
    factors = {"gm_total": share, "excess_pole": share, "input_noise": share**-0.5}
    eased = {
        name: replace(one, value=one.value * factors.get(name, 1.0)) for name, one in asked.items()
    }
    if "dc_gain" in eased:
        gain = eased["dc_gain"].value + 20 * float(np.log10(share))
        eased["dc_gain"] = replace(eased["dc_gain"], value=gain)
    if "intrinsic_gain" in eased:
        gain = min(eased["intrinsic_gain"].value, EASED_GAIN)
        eased["intrinsic_gain"] = replace(eased["intrinsic_gain"], value=gain)
    return eased


def describe_swing(asked: float, largest: float, supply: Supply) -> str:
    """Say that a swing does not fit between the rails.

    Parameters
    ----------
    asked, largest : float
        Differential peaks [V].
    supply : Supply
        What the amplifiers are fed with.

    Returns
    -------
    str
        What was asked, what there is, what to do.

    Examples
    --------
    >>> describe_swing(3.4, 1.62, Supply(1.8, 2e-6, tolerance=0.1))
    'No amplifier swings 3.4 V: at a supply of 1.62 V both outputs reach the rails at a \
differential peak of 1.62 V. Ask for 810 mV or less, or for more supply.'
    """
    lowest = format_quantity(float(np.min(supply.voltages)), "V")
    return (
        f"No amplifier swings {format_quantity(asked, 'V')}: at a supply of {lowest} both outputs "
        f"reach the rails at a differential peak of {format_quantity(largest, 'V')}. Ask for "
        f"{format_quantity(EASED_SWING * largest, 'V', digits=2)} or less, or for more supply."
    )


def describe_speed(wanted: float, fastest: float, others: Mapping[str, float]) -> str:
    """Say that no transistor is fast enough, and what would ask for less.

    Parameters
    ----------
    wanted : float
        Excess-phase pole that is needed [Hz].
    fastest : float
        That no mirror exceeds [Hz].
    others : mapping of str to float
        Pole that other meanings of the tolerance ask for [Hz].

    Returns
    -------
    str
        What was asked, what there is, what to do.

    Examples
    --------
    >>> describe_speed(30e9, 10e9, {"shape": 20e9, "tuned-shape": 1e9})
    'No amplifier is so fast: an excess-phase pole of 30 GHz is needed, and mirrors of the \
shortest transistors stay below 10 GHz. With counts = "tuned-shape" it would be 1 GHz.'
    """
    fits = [name for name, pole in others.items() if pole < fastest]
    advice = "Allow more tolerance, or a lower edge."
    if fits:
        pole = format_quantity(others[fits[-1]], "Hz", digits=2)
        advice = f'With counts = "{fits[-1]}" it would be {pole}.'
    return (
        f"No amplifier is so fast: an excess-phase pole of "
        f"{format_quantity(wanted, 'Hz', digits=3)} is needed, and mirrors of the "
        f"shortest transistors stay below {format_quantity(fastest, 'Hz', digits=2)}. {advice}"
    )
