"""Writers of layouts of rows: CSV, columns, blocks."""

from __future__ import annotations

from layouts.invented import INNER, NAMES, SIZE, Case, blocks, case, micro, row, text


@case
def csv_units() -> Case:
    """Units in every spelling, micro in Latin-1, CRLF."""
    lines = ["# invented data", 'L [\u00b5m];vgs[mV];vds (V);vsb/V;id (\u00b5A);gm_uS;"gds, S";gmb']
    for k in range(SIZE):
        vgs, *rest = row(k, "vgs", "vds", "vsb", "id", "gm", "gds", "gmb")
        vds, vsb, current, gm, gds, gmb = rest
        words = [micro(k), f"{vgs * 1e3:g}", f"{vds!r}", f"{vsb!r}", repr(current * 1e6),
                 repr(gm * 1e6), repr(gds), repr(gmb)]  # fmt: skip
        lines.append(";".join(words).replace(".", ","))
    return "", {"a.dat": "\r\n".join([*lines, ""]).encode("latin-1")}


@case
def csv_utf16() -> Case:
    """TAB between columns, UTF-16 with byte-order mark, a line of units."""
    names = ("length", "vsb", "vds", "vgs", *NAMES)
    lines = ["\t".join(names), "\t".join(["m", "V", "V", "V", "A", "S", "S", "S"])]
    lines += ["\t".join(map(repr, row(k, *names))) for k in range(SIZE)]
    return "", {"a.txt": "\n".join([*lines, ""]).encode("utf-16")}


@case
def csv_column_blocks() -> Case:
    """One block of columns for each length."""
    half = SIZE // 2
    heads = [f"{name} L={micro(k)}u" for k in (0, half) for name in NAMES]
    lines = [",".join(["vgs", "vds", "vsb", *heads])]
    for k in range(half):
        words = row(k, "vgs", "vds", "vsb", *NAMES) + row(k + half, *NAMES)
        lines.append(",".join(map(repr, words)))
    more = """
[sweep.axes]
length = { from = "column", pattern = 'L=(\\S+)' }
[sweep.quantities]
id = "id L=*"
gm = "gm L=*"
gds = "gds L=*"
gmb = "gmb L=*"
"""
    return more, {"a.csv": text(lines)}


@case
def columns_header() -> Case:
    """Blanks, Fortran exponents, one file a length."""
    files = {}
    for half in blocks(SIZE // 2):
        lines = [" v-sweep   v(d)   v(b)   i(vd)   gm   gds   gmb "]
        for k in half:
            vgs, vds, vsb, current, *rest = row(k, "vgs", "vds", "vsb", *NAMES)
            words = [vgs, vds, -vsb, -current, *rest]
            lines.append(" " + " ".join(f"{v: .16E}".replace("E", "D") for v in words) + " ")
        files[f"nch_l{micro(half[0]).replace('.', 'p')}u.out"] = text(lines)
    more = """
[sweep.axes]
vgs = "v-sweep"
vds = "v(d)"
vsb = "-v(b)"
length = { from = "name", pattern = 'l([\\dp]+)u', unit = "um" }
[sweep.quantities]
id = "-i(vd)"
"""
    return more, files


@case
def columns_bare() -> Case:
    """No header, the scale before each vector, every outer axis implicit."""
    lines = []
    for k in range(SIZE):
        vgs, *values = row(k, "vgs", *NAMES)
        lines.append(" " + " ".join(f"{vgs:.16e} {value:.16e}" for value in values) + " ")
    more = """
columns = ["vgs", "id", "gm", "gds", "gmb"]
[sweep.axes]
vds = { restart = [0, 0.3, 0.9, 1.8] }
vsb = { restart = "0:0.6:0.6", outside = "vds" }
length = { restart = ["0.18 um", "0.36 um"], outside = "vsb" }
"""
    return more, {"a.prn": text(lines)}


@case
def blocks_comments() -> Case:
    """Parameters in comments above each block."""
    lines = []
    for part in blocks(INNER):
        _, vsb, vds = row(part[0], "length", "vsb", "vds")
        lines += [f"! corner=tt T=27 C  L={micro(part[0])} um  VDS={vds:.2f} V  VSB={vsb:.2f} V",
                  "!     VGS     ID    GM    GDS   GMB"]  # fmt: skip
        for k in part:
            words = [f"{v:.16E}".replace("E", "D") for v in row(k, "vgs", *NAMES)]
            lines.append(" " + "  ".join(words))
        lines.append("")
    return "", {"a.txt": text(lines)}


@case
def blocks_zones() -> Case:
    """The text of a plotting package."""
    lines = ['TITLE = "nch"', 'VARIABLES = "vgs" "id" "gm" "gds" "gmb"']
    for part in blocks(INNER):
        length, vsb, vds = row(part[0], "length", "vsb", "vds")
        lines.append(f'ZONE T="L={length * 1e9:.0f}n vds={vds:.1f} vsb={vsb:.1f}"')
        lines += [" ".join(map(repr, row(k, "vgs", *NAMES))) for k in part]
    return "", {"a.dat": text(lines)}


@case
def measured_blocks() -> Case:
    """Measured-data blocks: outer values above each, width and length quoted in the header."""
    files = {}
    for half in blocks(SIZE // 2):
        lines = ["! VERSION = 6.00", "BEGIN_HEADER", " BENCH_INPUTS",
                 f"  vg V G GROUND SMU2 0.1 LIN 1 0 1.8 {INNER} 0.3",
                 "  vd V D GROUND SMU1 0.1 LIST 2 4 0 0.3 0.9 1.8",
                      "  vs V S GROUND SMU4 0.1 CON 0",
                 " USER_PARAMS", f'  L "{micro(half[0])}u"', '  W "2u"', "END_HEADER",
                      ""]  # fmt: skip
        for start in range(half[0], half[-1], INNER):
            vds, vsb = row(start, "vds", "vsb")
            lines += ["BEGIN_DB", f" MEAS_VAR vd {vds!r}", f" MEAS_VAR vb {-vsb!r}",
                      "#vg   id   gm   gds   gmb"]  # fmt: skip
            for k in range(start, start + INNER):
                lines.append(" " + "  ".join(map(repr, row(k, "vgs", *NAMES))))
            lines += ["END_DB", ""]
        files[f"dut_{micro(half[0])}.mdm"] = text(lines)
    more = """
[sweep.axes]
vgs = "vg - vs"
vds = "vd - vs"
vsb = "vs - vb"
"""
    return more, files
