"""Writers of layouts that simulators have of their own."""

from __future__ import annotations

import numpy as np

from layouts.invented import COLUMNS, INNER, NAMES, SIZE, Case, blocks, case, micro, row, text

RAW_AXES = """
[sweep.axes]
vgs = "v(v-sweep)"
vds = "v(d)"
vsb = "-v(b)"
length = { from = "title", pattern = 'l=(\\S+)' }
[sweep.quantities]
id = "-i(vd)"
gm = "v(@m1[gm])"
gds = "@m1[gds]"
gmb = "@m1[gmbs]"
"""
RAW_NAMES = (("v(v-sweep)", "voltage"), ("v(d)", "voltage"), ("v(b)", "voltage"),
             ("i(vd)", "current"), ("v(@m1[gm])", "voltage"), ("@m1[gds]", "admittance"),
             ("@m1[gmbs]", "admittance"))  # fmt: skip


def raw_head(part: range, flags: str = "real") -> list[str]:
    return [
        f"Title: nch l={micro(part[0])}u", "Date: Tue Mar  3 10:00:00  2026",
        "Plotname: DC transfer characteristic", f"Flags: {flags}",
        f"No. Variables: {len(RAW_NAMES)}", f"No. Points: {len(part)}     ", "Variables:",
        *(f"\t{j}\t{name}\t{kind}" for j, (name, kind) in enumerate(RAW_NAMES)),
    ]  # fmt: skip


def raw_row(k: int) -> list[float]:
    vgs, vds, vsb, current, *rest = row(k, "vgs", "vds", "vsb", *NAMES)
    return [vgs, vds, -vsb, -current, *rest]


@case
def spice_raw() -> Case:
    """Several plots, wrapped names."""
    lines = []
    for part in blocks(SIZE // 4):
        lines += [*raw_head(part), "Values:"]
        for index, k in enumerate(part):
            first, *others = (f"{v:.16e}" for v in raw_row(k))
            lines += [f" {index}\t{first}", *(f"\t{word}" for word in others), ""]
    return RAW_AXES, {"a.raw": text(lines)}


@case
def spice_raw_binary() -> Case:
    """The binary sibling."""
    data = b""
    for part in blocks(SIZE // 4):
        data += text([*raw_head(part), "Binary:"])
        data += np.array([raw_row(k) for k in part], dtype="<f8").tobytes()
    return RAW_AXES, {"a.raw": data}


@case
def spice_raw_parallel() -> Case:
    """Two devices of other length side by side in one sweep."""
    half = SIZE // 2
    names = [f"@m{j}[{name}]" for j in (1, 2) for name in NAMES]
    head = ["Title: parallel", "Plotname: DC transfer characteristic", "Flags: real",
            f"No. Variables: {3 + len(names)}", f"No. Points: {half}", "Variables:"]  # fmt: skip
    head += [f"\t{j}\t{name}\tvoltage" for j, name in enumerate(["g", "d", "b", *names])]
    lines = [*head, "Values:"]
    for k in range(half):
        words = [*row(k, "vgs", "vds"), -COLUMNS["vsb"][k], *row(k, *NAMES), *row(k + half, *NAMES)]
        lines.append(f"{k}\t\t" + "\n\t".join(f"{v:.16e}" for v in words))
    more = """
[sweep.axes]
vgs = "g"
vds = "d"
vsb = "-b"
length = { from = "column", pattern = '@(m\\d)', values = { m1 = "0.18 um", m2 = "0.36 um" } }
[sweep.quantities]
id = "@*[id]"
gm = "@*[gm]"
gds = "@*[gds]"
gmb = "@*[gmb]"
"""
    return more, {"a.raw": text(lines)}


@case
def print_listing() -> Case:
    """Pages, tables split for want of width and joined by their Index, log lines between."""
    dashes = "-" * 70
    lines = ["Circuit: nch", "", "Doing analysis at TEMP = 27.000000", ""]
    for part in blocks(SIZE // 2):
        title = f"                   nch sweep l={micro(part[0])}u"
        kind = "                   DC transfer characteristic  Tue Mar  3 10:00:00  2026"
        for names in (("vds", "vsb", "id"), ("gm", "gds", "gmb")):
            shown = {"id": "vd#branch", "vds": "v(d)", "vsb": "v(b)"}
            header = "Index   v-sweep         " + "".join(f"{shown.get(n, n):16}" for n in names)
            for start in range(0, len(part), 20):
                lines += [title, kind, dashes, header, dashes]
                for k in part[start : start + 20]:
                    signs = [-1 if name in ("id", "vsb") else 1 for name in names]
                    words = [f"{s * v:.16e}" for s, v in zip(signs, row(k, *names), strict=True)]
                    lines.append(
                        "\t".join([str(k - part[0]), f"{COLUMNS['vgs'][k]:.16e}", *words, ""])
                    )
                lines += ["", "\f"]
    lines += ["Total analysis time (seconds) = 0.1", "No. of Data Rows : 112"]
    more = (
        RAW_AXES.split("length =")[0].replace("v(v-sweep)", "v-sweep")
        + """
length = { from = "title", pattern = 'l=(\\S+)' }
[sweep.quantities]
id = "-vd#branch"
"""
    )
    return more, {"a.lis": text(lines)}


def suffixed(value: float) -> str:
    """Write a number with a suffix where there is one, all digits kept."""
    for power, letter in ((-3, "m"), (-6, "u"), (-9, "n"), (-12, "p"), (-15, "f")):
        if abs(value) > 0 and 1 <= abs(value) / 10.0**power < 1000:
            return f"{np.format_float_positional(float(f'{value:.16e}'.split('e')[0]))}e" + (
                f"{int(f'{value:e}'.split('e')[1]) - power}{letter}"
            )
    return f"{value!r}"


@case
def print_listing_hash() -> Case:
    """Header behind ``#``, the scale without a name, suffixes mixed in a column."""
    lines = []
    for part in blocks(INNER):
        lines += [f"nch l={micro(part[0])}u", "#     v(d)   v(b)   id(m1)   gm   gds   gmb"]
        for k in part:
            vgs, vds, vsb, *rest = row(k, "vgs", "vds", "vsb", *NAMES)
            lines.append(" ".join([f"{vgs:.2f}", suffixed(vds), suffixed(-vsb),
                                   *map(suffixed, rest)]))  # fmt: skip
    more = """
[sweep.axes]
vgs = "scale"
vds = "v(d)"
vsb = "-v(b)"
length = { from = "title", pattern = 'l=(\\S+)' }
[sweep.quantities]
id = "id(m1)"
"""
    return more, {"a.prn": text(lines)}


@case
def stepped() -> Case:
    """Runs that begin with their step parameters."""
    parts = list(blocks(INNER))
    lines = ["vgs\tId(M1)\tgm\tgds\tgmb"]
    for run, part in enumerate(parts, 1):
        length, vsb, vds = row(part[0], "length", "vsb", "vds")
        lines.append(f"Step Information: L={length * 1e9:.0f}n Vsb={vsb * 1e3:.0f}m "
                     f"Vdd={vds * 1e3:.0f}m  (Run: {run}/{len(parts)})")  # fmt: skip
        lines += ["\t".join(f"{v:.17e}" for v in row(k, "vgs", *NAMES)) for k in part]
    more = """
[sweep.axes]
vsb = "Vsb"
vds = "Vdd"
[sweep.quantities]
id = "Id(M1)"
"""
    return more, {"a.txt": text(lines)}


@case
def typed_trace() -> Case:
    """One file an outer point: length in the header, vds and vsb in the folder's name."""
    files = {}
    for part in blocks(INNER):
        length, vsb, vds = row(part[0], "length", "vsb", "vds")
        lines = ["HEADER", '"PSFversion" "1.00"', f'"l" {length!r}', "TYPE",
             '"sweep" FLOAT DOUBLE PROP(',
                 '"key" "sweep"', ")", '"V" FLOAT DOUBLE PROP(', '"units" "V"', ")",
                 '"S" FLOAT DOUBLE PROP(', '"units" "S"', ")", '"I" FLOAT DOUBLE PROP(',
                 '"key" "inst"', ")", "SWEEP", '"dc" "sweep" PROP(', '"units" "V"', ")", "TRACE",
                 '"M0:d" "I"', '"M0:gm" "S"', '"g0" GROUP 2', '"M0:gds" "S"', '"M0:gmb\\<0\\>" "S"',
                 "VALUE"]  # fmt: skip
        for k in part:
            vgs, current, gm, gds, gmb = row(k, "vgs", *NAMES)
            lines += [f'"dc" {vgs:.16e}', f'"M0:d" {current:.16e}', f'"M0:gm" {gm:.16e}',
                      f'"g0" {gds:.16e}', f"{gmb:.16e}"]  # fmt: skip
        name = f"vds{vds:.1f}_vsb{vsb:.1f}_l{length * 1e9:.0f}n/dc.dc"
        files[name] = text([*lines, "END"])
    more = """
[sweep.axes]
vgs = "dc"
vds = { from = "name", pattern = 'vds([\\d.]+)_' }
vsb = { from = "name", pattern = 'vsb([\\d.]+)_' }
length = { from = "header", pattern = '^PSFversion[^$]*l = (\\S+)', unit = "m" }
[sweep.quantities]
id = "M0:d"
gm = "M0:gm"
gds = "M0:gds"
gmb = "`M0:gmb<0>`"
"""
    return more, files


@case
def measurement() -> Case:
    """Names and rows wrapped, one file an alteration."""
    names = ["index", "lch", "vdrain", "vbulk", "vgate", "ids_m", "gm_m", "gds_m", "gmb_m",
             "temper", "alter#"]  # fmt: skip
    files = {}
    for number, half in enumerate(blocks(SIZE // 2)):
        lines = ["$DATA1 SOURCE='SIM' VERSION='1.0' PARAM_COUNT=4", ".TITLE 'nch l sweep'"]
        lines += [" " + "   ".join(names[j : j + 4]) for j in range(0, len(names), 4)]
        for k in half:
            values = [k - half[0] + 1.0, *row(k, "length", "vds"), -COLUMNS["vsb"][k],
                      *row(k, "vgs", *NAMES), 27.0]  # fmt: skip
            words = [f"{v:.16e}" for v in values] + [str(number)]
            lines += [" " + "   ".join(words[j : j + 4]) for j in range(0, len(words), 4)]
        files[f"a.ms{number}"] = text(lines)
    more = """
[sweep.axes]
vgs = "vgate"
vds = "vdrain"
vsb = "-vbulk"
length = { column = "lch", unit = "m" }
[sweep.quantities]
id = "ids_m"
gm = "gm_m"
gds = "gds_m"
gmb = "gmb_m"
"""
    return more, files


@case
def operating_point() -> Case:
    """One record a bias point."""
    lines = ["Operating point information"]
    for k in range(SIZE):
        length, vgs, vds, vsb, *rest = row(k, "length", "vgs", "vds", "vsb", *NAMES)
        words = [length, vgs, vds, -vsb, *rest]
        names = ("l", "vgs", "vds", "vbs", "id", "gm", "gds", "gmbs")
        lines += [f"@m1[{name}] = {v:.16e}" for name, v in zip(names, words, strict=True)] + [""]
    more = """
[sweep.axes]
vgs = "@m1[vgs]"
vds = "@m1[vds]"
vsb = "-@m1[vbs]"
length = { column = "@m1[l]", unit = "m" }
[sweep.quantities]
id = "@m1[id]"
gm = "@m1[gm]"
gds = "@m1[gds]"
gmb = "@m1[gmbs]"
"""
    return more, {"op.txt": text(lines)}
