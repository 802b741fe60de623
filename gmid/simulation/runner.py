"""Run a SPICE deck in the optional reference simulator and hand back named arrays.

The only module that imports the simulator.  It prints its warnings and leaves a log file in the
current folder: both are caught here.
"""

from __future__ import annotations

import contextlib
import ctypes
import os
import tempfile
import threading
from collections.abc import Iterator, Mapping
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault, GmidError, MissingExtra, NoSolution, UsageFault
from gmid.simulation.includes import inline_includes
from gmid.simulation.results import (
    AcResult,
    DcResult,
    NoiseResult,
    OperatingResult,
    Simulation,
    TransientResult,
)

_ANALYSES = (".op", ".dc", ".ac", ".noise", ".tran")
_ONE_AT_A_TIME = threading.RLock()

_MEMORY = "/dev/shm"
"""Folder in memory, where there is one: the simulator writes and syncs files on every run."""


def is_available() -> bool:
    """Say whether the reference simulator is installed.

    Returns
    -------
    bool
        False where ``gmid[simulate]`` is missing.

    Examples
    --------
    >>> is_available() in (True, False)
    True
    """
    import importlib.util

    return importlib.util.find_spec("neospice") is not None


def run_deck(
    text: str, *, folder: Path | str = ".", files: Mapping[str, str] | None = None
) -> Simulation:
    r"""Run a SPICE deck that has exactly one analysis line.

    The run happens in memory, in a temporary folder of its own: nothing is left in the current
    one.  Runs from several threads wait for each other.

    Parameters
    ----------
    text : str
        The deck; its first line is the title.
    folder : path, keyword-only
        Where relative ``.include`` and ``.lib`` files are looked for.
    files : mapping of str to str, optional
        Contents of include files by name; they come before files on disk.

    Returns
    -------
    OperatingResult, DcResult, AcResult, NoiseResult or TransientResult
        By the analysis line.

    Raises
    ------
    MissingExtra
        The simulator is not installed.
    UsageFault
        The deck has no analysis line, or several.
    FileTrouble
        An include file cannot be read.
    DataFault
        The simulator does not understand the deck, or would leave out a part of it.
    NoSolution
        The simulator does not converge, or gives values that are not finite.

    Examples
    --------
    >>> deck = "divider\nv1 in 0 1\nr1 in out 1k\nr2 out 0 3k\n.op\n.end\n"
    >>> if is_available():
    ...     assert abs(run_deck(deck).voltage("out")[0] - 0.75) < 1e-9
    """
    engine = _load_engine()
    flat = inline_includes(text, folder=folder, files=files)
    analysis = _find_analysis(flat)
    with _ONE_AT_A_TIME, _quiet_folder() as log:
        try:
            simulator = engine.Simulator()
            answer = simulator.run(simulator.parse(flat))
        except RuntimeError as error:
            raise _translate(str(error), log()) from error
        said = log()
    _refuse_partial(said)
    result = _collect(answer, said)
    _refuse_infinite(result, analysis)
    return result


def _load_engine() -> ModuleType:
    try:
        import neospice
    except ImportError as error:
        raise MissingExtra(
            "the reference simulator is not installed.", hint='pip install "gmid[simulate]"'
        ) from error
    return neospice


def _find_analysis(flat: str) -> str:
    lines = flat.splitlines()[1:]
    found = [line.strip() for line in lines if line.strip().lower().split(" ")[0] in _ANALYSES]
    if len(found) != 1:
        raise UsageFault(
            f"a deck needs exactly one analysis line, this one has {len(found)}.",
            hint=f"Choose one of {', '.join(_ANALYSES)}.",
        )
    return found[0]


@contextlib.contextmanager
def _quiet_folder() -> Iterator[Any]:
    """Work in a temporary folder with what the simulator prints caught in a file."""
    memory = _MEMORY if os.access(_MEMORY, os.W_OK) else None
    with contextlib.ExitStack() as stack:
        scratch = stack.enter_context(tempfile.TemporaryDirectory(prefix="gmid-", dir=memory))
        caught = stack.enter_context(tempfile.TemporaryFile(dir=memory))
        _flush()
        for stream in (1, 2):
            kept = os.dup(stream)
            stack.callback(os.close, kept)
            stack.callback(os.dup2, kept, stream)
            stack.callback(_flush)
            os.dup2(caught.fileno(), stream)
        stack.enter_context(contextlib.chdir(scratch))

        def read() -> str:
            _flush()
            end = os.lseek(caught.fileno(), 0, os.SEEK_CUR)
            return os.pread(caught.fileno(), end, 0).decode("utf-8", "replace")

        yield read


def _flush() -> None:
    ctypes.CDLL(None).fflush(None)


def _translate(message: str, log: str) -> GmidError:
    said = " ".join(line for line in log.splitlines() if "ERROR" in line)
    text = f"the simulator says: {message}.{' ' if said else ''}{said}"
    return (NoSolution if "converge" in message.lower() else DataFault)(text)


def _refuse_partial(log: str) -> None:
    lost = [line.strip() for line in log.splitlines() if "skipping" in line.lower()]
    if lost:
        raise DataFault(f"the simulator would leave out a part of the deck: {'; '.join(lost)}")


def _collect(answer: Any, log: str) -> Simulation:
    kind = str(answer.analysis_type)
    if not getattr(answer, kind).status.converged:
        raise NoSolution(f"the {kind} analysis did not converge.")
    if kind == "noise":
        noise = answer.noise
        parts = {name: np.array(noise.device_noise_density(name)) for name in noise.device_names()}
        spectra = (np.array(noise.output_noise_density), np.array(noise.input_noise_density))
        return NoiseResult({}, log, np.array(noise.frequency), *spectra, parts)
    data = getattr(answer, kind)
    signals = {name.lower(): np.atleast_1d(_read(data, name)) for name in data.signal_names()}
    if kind == "dc":
        return OperatingResult(signals, log)
    if kind == "dc_sweep":
        return DcResult(signals, log, np.array(data.sweep_values))
    if kind == "ac":
        return AcResult(signals, log, np.array(data.frequency))
    return TransientResult(signals, log, np.array(data.time))


def _read(data: Any, name: str) -> NDArray[Any]:
    inner = name[2:-1]
    return np.array(data.current(inner) if name.lower().startswith("i(") else data.voltage(inner))


def _refuse_infinite(result: Simulation, analysis: str) -> None:
    arrays = dict(result.signals)
    if isinstance(result, NoiseResult):
        arrays |= {"output noise": result.output, **result.by_device}
    bad = [name for name, values in arrays.items() if not np.isfinite(values).all()]
    if bad or not (arrays):
        what = f"{', '.join(bad[:5])} not finite" if bad else "no signals"
        raise NoSolution(f"the simulation '{analysis}' gave {what}.")
