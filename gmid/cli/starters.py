"""Texts of the commented starter files."""

from __future__ import annotations

REQUEST = """\
# What to size.  Size it with
#     gmid size THIS_FILE -o DIR
format = 1
title = "My filter"

[process]
table = "my_process.h5"             # relative to this file
# conditions = ["tt/27", "ss/-40", "ss/125", "ff/-40", "ff/125"]   # default: all in the table
# own_well = ["pmos"]               # devices whose bulk may go to the source
[process.devices]                   # names in the table
n = "nmos"
p = "pmos"
# follower = "nmos_low"             # other flavours, where you have them: pair, follower, cascode

[supply]
voltage = "1.8 V"
tolerance = "10 %"                  # low, nominal and high are all checked
common_mode = "50 %"                # of the supply, or a voltage
reference_current = "2 uA"
reference_tolerance = "10 %"

# Either a filter, or in its place [demands] as below.
[filter]
response = "chebyshev"              # butterworth inverse-chebyshev elliptic bessel sections
kind = "lowpass"                    # lowpass highpass bandpass
order = 5                           # or "auto" from stop_edge and attenuation
edge = "400 kHz"                    # a pair for bandpass
ripple = "0.5 dB"
style = "active-rc"                 # or "gm-c"
swing = "0.6 V"                     # peak differential, largest node
snr = "66 dB"
noise_band = ["1 kHz", "400 kHz"]
capacitor = "auto"                  # or a value, per side
load_capacitance = "0.5 pF"
load_resistance = "1 Mohm"

[tolerance]
passband = "0.2 dB"
counts = "tuned-shape"              # all; shape: flat gain aside; tuned-shape: frequency shift too
stopband = "1 dB"
up_to = "10 MHz"

# [passives]                        # ideal where absent
# capacitor_density = "1 fF/um2"
# bottom_plate = "5 %"
# capacitor_spread = "12 %"
# resistor_spread = "18 %"
# unit_capacitor = "100 fF"
# unit_resistor = "10 kohm"

# [amplifier]                       # all of it may be left to the search
# input_pair = "auto"               # n p
# output = "auto"                   # plain cascoded
# common_mode_sense = "auto"        # resistors followers pairs
# lengths = ["0.3 um", "0.6 um", "1 um"]
# saturation_margin = "50 mV"

# [matching]                        # sigma of the difference of two devices
# nmos = {{ avt = "3.5 mV um", abeta = "1 % um" }}

# In place of [filter] and [tolerance]:
# [demands]
{demands}
"""
"""A starter request; braces doubled for formatting."""

_SPELLED = {
    "dc_gain": '"60 dB"', "gbw": '"20 MHz"', "phase_margin": '"60 deg"', "swing": '"0.8 V"',
    "input_noise": '{ density = "40 nV/rtHz", at = "1 MHz" }', "slew_rate": '"20 V/us"',
    "gm_total": '"300 uS"', "intrinsic_gain": '"50 dB"', "excess_pole": '"50 MHz"',
    "output_current": '"10 uA"',
    "common_mode_gain": '"-6 dB"', "offset": '"5 mV"', "supply_current": '"100 uA"',
}  # fmt: skip


def request_text() -> str:
    """Fill the starter request with every demand this version knows.

    Returns
    -------
    str
        TOML.

    Examples
    --------
    >>> request_text().splitlines()[2]
    'format = 1'
    """
    from gmid.request.requirements import DEMANDS

    lines = ['# load_capacitance = "1 pF"', '# load_resistance = "1 Mohm"']
    for name, kind in DEMANDS.items():
        line = f"# {name} = {_SPELLED[name]}"
        lines.append(f"{line:<36}# {kind.meaning}")
    return REQUEST.format(demands="\n".join(lines))
