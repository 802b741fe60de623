"""Two further invented processes, as BSIM4 cards, and tables made of them by simulation.

Neither describes a real process.  `birch250` has a thick oxide and long channels and a 2.5 V
supply; `reed90` a thin oxide whose gate leaks, leaking junctions, steep threshold roll-off and
drain-induced barrier lowering, and a 1.2 V supply.  Each is a pair of an n- and a p-channel
device with a typical, a slow and a fast corner.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from characterise import characterise
from gmid.condition import Condition
from gmid.sweep.model import Sweep, UnitTransistor
from gmid.table.saving import save_sweeps
from larch180.cards import COMMON, N_TYPE, P_TYPE

SPEEDS = {"tt": 0, "ss": -1, "ff": 1}

CONDITIONS = (Condition("tt", 27.0), Condition("ss", -40.0), Condition("ff", 125.0))
"""Typical, slow and cold, fast and hot."""

_LENGTHS = (1.0, 1.1, 1.25, 1.5, 1.95, 2.8, 4.2, 6.8, 12.0)
"""Lengths of a dense grid over the shortest, closest where the threshold rolls off."""

_DRAIN = (0.0, 0.025, 0.05, 0.08, 0.12, 0.17, 0.23, 0.3, 0.4, 0.52, 0.67, 0.85, 1.05, 1.3,
          1.6)  # fmt: skip


@dataclass(frozen=True)
class Process:
    """An invented process: supply, unit width, two cards, and its grids."""

    name: str
    supply: float
    width: float
    knee: float
    step: float
    cards: dict[str, dict[str, float]]
    grid: dict[str, list[float]] = field(repr=False)

    @property
    def devices(self) -> dict[str, str]:
        """Devices and their polarity."""
        return {"nmos": "n", "pmos": "p"}

    def model(self, device: str) -> str:
        """Name of a device's model card."""
        return f"{self.name}_{device[0]}"

    def models(self, corner: str) -> str:
        """Model cards of a corner, as an include file."""
        lines = [f"* {self.name}, invented, corner {corner}"]
        for device, typical in self.cards.items():
            values = _shift(typical, SPEEDS[corner])
            lines.append(f".model {self.model(device)} {device}")
            lines += [f"+ {name}={value:.7g}" for name, value in values.items()]
        return "\n".join(lines) + "\n"

    def simulate(self, device: str, condition: Condition, **bias: object) -> dict[str, np.ndarray]:
        """Simulate a device at any list of bias points."""
        return characterise(
            self.models(condition.corner), self.model(device), polarity=self.devices[device],
            temperature=condition.temperature, width=self.width, **bias,
        )  # fmt: skip

    def dense_grid(self) -> dict[str, list[float]]:
        """A grid of some 27 000 points: 50 mV up to the largest threshold, wider above."""
        shortest = self.grid["length"][0]
        scale, top = self.supply / 1.8, self.grid["vgs"][-1]
        low = np.arange(0.0, self.knee + 0.01, 0.05)
        high = np.linspace(low[-1], top, 1 + round((top - low[-1]) / self.step))[1:]
        return {
            "length": [shortest * ratio for ratio in _LENGTHS],
            "vsb": [round(scale * vsb, 4) for vsb in (0.0, 0.2, 0.5, 0.9, 1.4)],
            "vds": [round(scale * vds, 4) for vds in _DRAIN] + [self.grid["vds"][-1]],
            "vgs": [-0.2, -0.1, *low, *high],
        }

    def sweep(self, device: str, condition: Condition, *, dense: bool = False) -> Sweep:
        """Characterise a device on the process's grid."""
        grid = self.dense_grid() if dense else self.grid
        axes = {name: np.asarray(values, dtype=float) for name, values in grid.items()}
        mesh = dict(zip(axes, np.meshgrid(*axes.values(), indexing="ij"), strict=True))
        polarity = self.devices[device]
        line = f"M{{name}} {{d}} {{g}} {{s}} {{b}} {self.model(device)} w={{width}} l={{length}}"
        unit = UnitTransistor(polarity, self.width, netlist=f"{line} m={{count}}")
        values = self.simulate(device, condition, **mesh)
        return Sweep(device, condition, unit, **axes, values=values,
                     nominal=condition == CONDITIONS[0])  # fmt: skip

    def write_table(
        self,
        path: Path,
        *,
        devices: Sequence[str] = ("nmos", "pmos"),
        conditions: Sequence[Condition] = CONDITIONS,
    ) -> Path:
        """Characterise devices in conditions and store them as a table."""
        sweeps = [self.sweep(device, condition) for condition in conditions for device in devices]
        save_sweeps(path, sweeps, process=self.name)
        return path


def _shift(typical: dict[str, float], speed: int) -> dict[str, float]:
    """Move a card to a corner: threshold, mobility, oxide, junctions."""
    values = dict(typical)
    values["vth0"] -= 0.04 * speed * (1 if values["vth0"] > 0 else -1)
    values["u0"] *= 1.05**speed
    values["vsat"] *= 1.04**speed
    values["cjs"] *= 0.95**speed
    values["jss"] *= 3.0**speed
    for name in ("toxe", "toxm"):
        values[name] *= 0.98**speed
    return values


_BIRCH = {
    "toxe": 5.7e-9, "toxm": 5.7e-9, "xj": 1.6e-7, "lint": 2.0e-8, "ndep": 1.6e17,
    "vth0": 0.52, "k1": 0.71, "k2": -0.01, "lpe0": 9.0e-8, "dvt0": 2.6, "dvt1": 0.72,
    "u0": 0.042, "ua": -2.0e-10, "ub": 1.6e-18, "vsat": 9.6e4, "a0": 0.95, "ags": 0.16,
    "keta": 0.006, "voff": -0.125, "nfactor": 1.1, "cdsc": 6.0e-4, "eta0": 0.03, "etab": -0.02,
    "dsub": 0.62, "pclm": 1.3, "pdiblc1": 0.3, "pdiblc2": 0.002, "drout": 0.6, "pvag": 0.2,
    "delta": 0.018, "rdsw": 420, "cgso": 1.9e-10, "cgdo": 1.9e-10, "cjs": 7.2e-4,
    "noia": 2.0e41, "noib": 9.0e24, "kt1": -0.33, "ute": -1.7, "at": 3.3e4,
}  # fmt: skip

_REED = {
    "toxe": 2.2e-9, "toxm": 2.2e-9, "xj": 6.0e-8, "lint": 5.0e-9, "ndep": 1.4e18,
    "vth0": 0.31, "k1": 0.38, "k2": 0.012, "lpe0": 2.5e-8, "dvt0": 1.9, "dvt1": 0.42,
    "u0": 0.027, "ua": -7.0e-10, "ub": 3.0e-18, "vsat": 1.15e5, "a0": 1.6, "ags": 0.5,
    "keta": -0.03, "voff": -0.09, "nfactor": 1.5, "cdsc": 3.0e-4, "eta0": 0.11, "etab": -0.06,
    "dsub": 0.42, "pclm": 0.55, "pdiblc1": 0.09, "pdiblc2": 0.011, "drout": 0.4, "pvag": 0.02,
    "delta": 0.02, "rdsw": 110, "cgso": 2.4e-10, "cgdo": 2.4e-10, "cjs": 1.2e-3,
    "noia": 9.0e41, "noib": 4.0e25, "kt1": -0.19, "ute": -1.3, "at": 1.6e4,
    "igcmod": 1, "igbmod": 1, "pigcd": 1.0, "aigc": 0.0125, "bigc": 0.0018, "cigc": 0.06,
    "aigsd": 0.0105, "bigsd": 0.0014, "cigsd": 0.08, "dlcig": 5.0e-9, "toxref": 2.2e-9,
    "jss": 4.0e-4, "jsws": 3.0e-11, "jswgs": 3.0e-11,
}  # fmt: skip

BIRCH = Process(
    "birch250", 2.5, 4.0e-6, 1.4, 0.135,
    {
        "nmos": COMMON | N_TYPE | _BIRCH,
        "pmos": COMMON | P_TYPE | _BIRCH | {
            "vth0": -0.57, "u0": 0.0135, "ua": 9.0e-10, "ub": 1.3e-18, "vsat": 1.2e5,
            "nfactor": 1.25, "eta0": 0.04, "rdsw": 900, "noia": 6.0e40, "noib": 2.0e24,
        },
    },
    {
        "length": [0.25e-6, 0.29e-6, 0.36e-6, 0.5e-6, 0.85e-6, 1.6e-6, 3.0e-6],
        "vsb": [0.0, 0.4, 1.0, 1.9],
        "vds": [0.0, 0.04, 0.08, 0.13, 0.2, 0.28, 0.38, 0.5, 0.65, 0.85, 1.1, 1.4, 1.75, 2.2,
                2.75],
        "vgs": [-0.2, -0.1, *np.arange(0.0, 1.101, 0.05), 1.2, 1.35, 1.5, 1.7, 1.95, 2.2, 2.45,
                2.75],
    },
)  # fmt: skip

REED = Process(
    "reed90", 1.2, 1.0e-6, 0.85, 0.052,
    {
        "nmos": COMMON | N_TYPE | _REED,
        "pmos": COMMON | P_TYPE | _REED | {
            "vth0": -0.33, "u0": 0.0095, "ua": 2.0e-10, "ub": 1.5e-18, "vsat": 9.5e4,
            "nfactor": 1.6, "eta0": 0.13, "rdsw": 230, "noia": 3.0e41, "noib": 9.0e24,
            "aigc": 0.0092, "bigc": 7.0e-4, "cigc": 0.03, "aigsd": 0.0092, "bigsd": 7.0e-4,
            "cigsd": 0.03,
        },
    },
    {
        "length": [0.09e-6, 0.105e-6, 0.13e-6, 0.18e-6, 0.28e-6, 0.5e-6, 1.0e-6],
        "vsb": [0.0, 0.25, 0.6, 1.0],
        "vds": [0.0, 0.03, 0.06, 0.1, 0.15, 0.21, 0.28, 0.36, 0.46, 0.58, 0.7, 0.85, 1.0, 1.15,
                1.32],
        "vgs": [-0.2, -0.1, *np.arange(0.0, 0.901, 0.05), 1.0, 1.1, 1.2, 1.32],
    },
)  # fmt: skip

PROCESSES = {process.name: process for process in (BIRCH, REED)}
