"""What a process lets a mirror amplifier have, before one is sized: its pole, its noise."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from gmid.amplifier.plan import Supply
from gmid.device.device import Device
from gmid.device.operating_point import OperatingPoint
from gmid.errors import OutOfReach

MIRROR_GM_OVER_ID = 10.0
"""At which mirrors are usually run [1/V]; common practice."""

MIRROR_LENGTH = 3.0
"""Length of mirrors over the least length of the table [-]; common practice."""

BUILT_SHARES = (0.1, 0.2, 0.4, 0.8)
"""What may be built in at each output, over the integrating capacitor, to slow its loop down."""

OWN_SHARES = (0.15, 0.05)
"""Own capacitances of output and input, over gm_total/(2 pi) over the pole of usual mirrors [-];
common practice."""

WHITE_NOISE_FACTOR = 7.0
"""Of mirror amplifiers, without flicker noise [-]; common practice."""

MIRROR_LOAD = 8.0
"""Gate capacitances of one unit that hang on a mirror's node for each of its diode's units."""


def estimate_pole(
    bench: list[tuple[object, Mapping[str, Device]]], roles: Mapping[str, str], supply: Supply
) -> float:
    """Estimate the excess-phase pole that amplifiers of a process reach in every condition.

    Parameters
    ----------
    bench : list of (Condition, mapping of str to Device)
        Conditions and devices.
    roles : mapping of str to str
        Device by role, `n` and `p`.
    supply : Supply
        Its voltage counts.

    Returns
    -------
    float
        ``gm/(2 pi 8 Cgg)`` of the slower channel in its slowest condition [Hz].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_supply
    >>> devices = example_devices()
    >>> found = estimate_pole([(None, devices)], {"n": "nmos", "p": "pmos"}, example_supply())
    >>> 1e6 < found < 1e9
    True
    """
    found = [
        float(point.gm / (2 * np.pi * MIRROR_LOAD * point.cgg))
        for _, devices in bench
        for point in _bias_mirrors(devices, roles, supply)
    ]
    return min(found)


def estimate_noise_factor(
    devices: Mapping[str, Device], roles: Mapping[str, str], supply: Supply, frequency: float
) -> float:
    """Estimate the noise factor at which the current of a filter is about least.

    Long transistors make less flicker noise but cost speed, so that some of it is best left to
    larger capacitors: about ``7 (1 + sqrt(fc/f))``, with the flicker corner fc of usual mirrors.

    Parameters
    ----------
    devices : mapping of str to Device
        Of the nominal condition.
    roles : mapping of str to str
        Device by role, `n` and `p`.
    supply : Supply
        Its voltage counts.
    frequency : float
        At which the noise has its mean in the band [Hz].

    Returns
    -------
    float
        Flicker noise included [-]; the white one where the table has no noise.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_supply
    >>> roles = {"n": "nmos", "p": "pmos"}
    >>> low, high = (estimate_noise_factor(example_devices(), roles, example_supply(), f)
    ...              for f in (1e4, 1e8))
    >>> 7.0 <= high < low
    True
    """
    if any("noise_flicker" not in devices[roles[role]].sweep for role in ("n", "p")):
        return WHITE_NOISE_FACTOR
    corners = [
        float(point.noise_flicker / point.noise_thermal)
        for point in _bias_mirrors(devices, roles, supply)
    ]
    return WHITE_NOISE_FACTOR * (1.0 + float(np.sqrt(np.mean(corners) / frequency)))


def _bias_mirrors(
    devices: Mapping[str, Device], roles: Mapping[str, str], supply: Supply
) -> list[OperatingPoint]:
    """Bias one unit of each channel as mirrors usually are."""
    found = []
    for role in ("n", "p"):
        device = devices[roles[role]]
        grid = device.sweep.length
        length = float(np.clip(MIRROR_LENGTH * grid[0], grid[0], grid[-1]))
        for share in (1.0, 0.7, 1.4):
            try:
                found.append(
                    device.at(
                        gm_over_id=share * MIRROR_GM_OVER_ID, length=length,
                        vds=0.3 * supply.voltage,
                    )
                )  # fmt: skip
            except OutOfReach:  # another efficiency may be within the table
                continue
            break
        else:
            raise OutOfReach(
                f"{roles[role]} cannot be biased at gm/Id = {MIRROR_GM_OVER_ID:g} 1/V or near it.",
                hint="Import a table that reaches into strong inversion.",
            )
    return found
