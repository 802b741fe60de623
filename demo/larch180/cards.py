"""Write the invented model cards of `larch180`, one include file for each process corner.

`larch180` does not exist.  Its three transistors are plausible members of a generic 1.8 V,
180 nm class, made up for this demo; no number comes from a real process.  The corners shift
the typical cards from one place, the table `SHIFTS`.

    python demo/larch180/cards.py [--out DIR]
"""

from __future__ import annotations

import argparse
from pathlib import Path

CORNERS = ("tt", "ss", "ff", "sf", "fs")

COMMON: dict[str, float] = {
    "level": 14,
    "mobmod": 0, "capmod": 2, "diomod": 1, "rdsmod": 0, "igcmod": 0, "igbmod": 0,
    "rbodymod": 0, "rgatemod": 0, "trnqsmod": 0, "acnqsmod": 0,
    "fnoimod": 1, "tnoimod": 0, "geomod": 0, "permod": 1, "paramchk": 1, "tnom": 27,
    "toxe": 4.1e-9, "toxm": 4.1e-9, "xj": 1.2e-7, "lint": 1.0e-8, "wint": 5.0e-9,
    "dmcg": 2.4e-7, "dmci": 2.4e-7, "xpart": 0,
    "dvt0w": 0, "dvt2": -0.02, "dsub": 0.5, "dwg": 0, "dwb": 0,
    "b0": 0, "b1": 0, "cdscb": 0, "cdscd": 0, "cit": 0, "ef": 1, "ntnoi": 1,
    "pdiblcb": 0, "pscbe1": 6.0e8, "pscbe2": 1.0e-9, "alpha0": 0, "alpha1": 0,
    "noff": 1, "voffcv": 0.0, "acde": 1, "moin": 15, "mjs": 0.40, "mjsws": 0.32,
    "mjswgs": 0.32, "pbs": 0.80, "pbsws": 0.80, "pbswgs": 0.80, "njs": 1.05, "xtis": 3,
    "tcj": 8.0e-4, "tcjsw": 4.0e-4, "tcjswg": 4.0e-4, "tpb": 1.2e-3, "tpbsw": 1.0e-3,
    "tpbswg": 1.0e-3, "cf": 0,
}  # fmt: skip

N_TYPE: dict[str, float] = {
    "vth0": 0.42, "k1": 0.52, "k2": 0.006, "k3": 0, "ndep": 3.4e17,
    "lpe0": 4.0e-8, "lpeb": 0, "dvt0": 1.3, "dvt1": 0.58,
    "u0": 0.036, "ua": -4.0e-10, "ub": 2.1e-18, "uc": 2.0e-11, "vsat": 8.6e4,
    "a0": 1.2, "ags": 0.25, "a1": 0, "a2": 1, "keta": -0.012,
    "voff": -0.105, "voffl": 0, "nfactor": 1.25, "minv": 0, "cdsc": 1.5e-4,
    "eta0": 0.055, "etab": -0.03, "pclm": 0.85, "pdiblc1": 0.16, "pdiblc2": 0.0046,
    "drout": 0.48, "pvag": 0.05, "delta": 0.025, "fprout": 0, "rdsw": 160, "prwg": 0.2,
    "prwb": -0.03, "cgso": 2.9e-10, "cgdo": 2.9e-10, "cgbo": 1.0e-12,
    "cgsl": 7.0e-11, "cgdl": 7.0e-11, "ckappas": 0.6, "ckappad": 0.6,
    "cjs": 9.6e-4, "cjsws": 1.6e-10, "cjswgs": 2.6e-10, "jss": 1.5e-7, "jsws": 2.0e-14,
    "jswgs": 2.0e-14, "noia": 5.0e41, "noib": 2.5e25, "noic": 8.0e8, "em": 4.1e7,
    "kt1": -0.24, "kt1l": 0, "kt2": -0.03, "ute": -1.55, "ua1": 1.2e-9, "ub1": -1.8e-18,
    "uc1": -3.0e-11, "at": 2.4e4, "prt": 20,
}  # fmt: skip

P_TYPE: dict[str, float] = N_TYPE | {
    "vth0": -0.42, "k1": 0.56, "k2": 0.002, "ndep": 4.0e17,
    "lpe0": 5.5e-8, "dvt0": 1.1, "dvt1": 0.55,
    "u0": 0.0098, "ua": 6.0e-10, "ub": 1.1e-18, "uc": 1.0e-11, "vsat": 1.05e5,
    "a0": 1.0, "ags": 0.3, "keta": -0.010, "voff": -0.115, "nfactor": 1.35,
    "eta0": 0.060, "etab": -0.035, "pclm": 1.05, "pdiblc1": 0.12, "pdiblc2": 0.0044,
    "drout": 0.50, "pvag": 0.08, "rdsw": 380, "prwb": -0.02,
    "cgso": 2.6e-10, "cgdo": 2.6e-10, "cjs": 1.12e-3, "cjsws": 1.9e-10, "cjswgs": 2.8e-10,
    "jss": 1.0e-7, "jsws": 1.5e-14, "jswgs": 1.5e-14,
    "noia": 1.6e41, "noib": 5.0e24, "noic": 4.0e8,
    "kt1": -0.26, "ute": -1.15, "ua1": 6.0e-10, "ub1": -1.2e-18, "at": 1.2e4, "prt": 40,
}  # fmt: skip

N_LOW: dict[str, float] = N_TYPE | {
    "vth0": 0.20, "k1": 0.44, "k2": 0.004, "ndep": 2.3e17, "nfactor": 1.3,
    "voff": -0.11, "eta0": 0.075, "u0": 0.038, "lpe0": 3.0e-8,
}  # fmt: skip

FLAVOURS = {
    "larch_n": ("nmos", N_TYPE),
    "larch_p": ("pmos", P_TYPE),
    "larch_n_low": ("nmos", N_LOW),
}

# For a fast device: |vth0| moves by -dvth [V], the others are multiplied; a slow one mirrors it.
SHIFTS: dict[str, tuple[str, float]] = {
    "vth0": ("less", 0.045), "u0": ("times", 1.06), "vsat": ("times", 1.04),
    "toxe": ("times", 0.975), "toxm": ("times", 0.975), "rdsw": ("times", 0.88),
    "lint": ("plus", 4.0e-9), "cjs": ("times", 0.94), "cjsws": ("times", 0.94),
    "cjswgs": ("times", 0.94), "jss": ("times", 3.0),
}  # fmt: skip

HEADER = """\
* larch180, process corner {corner}: {meaning}
* An invented 1.8 V, 180 nm class process. Every number is made up for the demo of this project
* and describes no real process. The temperature is set by the deck: .options temp=
"""


def _speed(corner: str, polarity: str) -> int:
    """Say +1 for a fast device, -1 for a slow one; a corner names the n-channel first."""
    letter = corner[0 if polarity == "nmos" else 1]
    return {"t": 0, "s": -1, "f": 1}[letter]


def shift(values: dict[str, float], speed: int) -> dict[str, float]:
    """Move a typical parameter set to a process corner.

    Parameters
    ----------
    values : dict of str to float
        The typical set.
    speed : int
        +1 fast, 0 typical, -1 slow.

    Returns
    -------
    dict of str to float
        A new set.
    """
    moved = dict(values)
    for name, (way, amount) in SHIFTS.items():
        if way == "times":
            moved[name] *= amount**speed
        elif way == "plus":
            moved[name] += amount * speed
        else:
            moved[name] -= amount * speed * (1 if moved[name] > 0 else -1)
    return moved


def write_card(name: str, corner: str) -> str:
    """Give one ``.model`` card of a corner as text.

    Parameters
    ----------
    name : str
        ``larch_n``, ``larch_p`` or ``larch_n_low``.
    corner : str
        One of `CORNERS`.

    Returns
    -------
    str
        The card, on continued lines.
    """
    polarity, own = FLAVOURS[name]
    values = shift(COMMON | own, _speed(corner, polarity))
    pairs = [f"{key}={value:.6g}" for key, value in values.items()]
    rows = [" ".join(pairs[i : i + 6]) for i in range(0, len(pairs), 6)]
    return "\n".join([f".model {name} {polarity}", *(f"+ {row}" for row in rows)])


def write_corner(corner: str) -> str:
    """Give the include file of a corner as text.

    Parameters
    ----------
    corner : str
        One of `CORNERS`.

    Returns
    -------
    str
        A comment and the three model cards.
    """
    words = {"t": "typical", "s": "slow", "f": "fast"}
    meaning = f"{words[corner[0]]} n-channel, {words[corner[1]]} p-channel"
    cards = "\n\n".join(write_card(name, corner) for name in FLAVOURS)
    return f"{HEADER.format(corner=corner, meaning=meaning)}\n{cards}\n"


def main() -> None:
    """Write every corner file."""
    parser = argparse.ArgumentParser(description="Write the invented larch180 model cards.")
    parser.add_argument("--out", type=Path, default=Path(__file__).parent / "models")
    folder = parser.parse_args().out
    folder.mkdir(parents=True, exist_ok=True)
    for corner in CORNERS:
        (folder / f"{corner}.inc").write_text(write_corner(corner), encoding="utf-8")


if __name__ == "__main__":
    main()
