"""A lock for files that several commands read, change and write."""

from __future__ import annotations

import contextlib
import os
import socket
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

from gmid.errors import FileTrouble

_POLL = 0.05

if sys.platform == "win32":
    import msvcrt

    _LOCKED_BYTE = 1 << 30  # far behind the holder's name, which others must be able to read

    def _grab(handle: int) -> bool:
        os.lseek(handle, _LOCKED_BYTE, os.SEEK_SET)
        try:
            msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)
        except PermissionError:
            return False
        return True
else:
    import fcntl

    def _grab(handle: int) -> bool:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            return False
        return True


@contextmanager
def locked(
    path: str | Path, *, wait: float, on_wait: Callable[[str], None] | None = None
) -> Iterator[None]:
    """Keep other processes from changing a file while it is read, changed and written.

    The lock is advisory, lies on a hidden file beside the target, and ends with the
    process that holds it, however that ends.

    Parameters
    ----------
    path : str or Path
        The file to be changed; it need not exist yet.
    wait : float
        Longest time to wait for the lock [s]; 0 tries once.
    on_wait : callable, optional
        Told once, in a sentence, when there is something to wait for.

    Yields
    ------
    None
        While the lock is held.

    Raises
    ------
    FileTrouble
        If another process holds the lock for too long, or the place allows no lock.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     with locked(Path(folder) / "t.h5", wait=1.0):
    ...         print("alone")
    alone
    """
    target = Path(os.path.realpath(path))
    side = target.with_name(f".{target.name}.lock")
    handle = _acquire(str(path), side, wait, on_wait)
    try:
        yield
    finally:
        if sys.platform != "win32":  # the name goes first, so that none waits on a dead file
            with contextlib.suppress(OSError):
                side.unlink(missing_ok=True)
        os.close(handle)


def _acquire(name: str, side: Path, wait: float, on_wait: Callable[[str], None] | None) -> int:
    """Take the lock, waiting for whoever holds it."""
    end = time.monotonic() + wait
    told = False
    while True:
        handle = _try_lock(name, side)
        if handle is not None:
            return handle
        holder = _holder(side)
        left = end - time.monotonic()
        if left <= 0:
            raise FileTrouble(
                f"is being changed by {holder}; waited {wait:g} s.", where=name,
                hint="Try again when that is done.",
            )  # fmt: skip
        if on_wait is not None and not told:
            on_wait(f"Waiting for {holder} to finish with {name}.")
            told = True
        time.sleep(min(_POLL, left))


def _try_lock(name: str, side: Path) -> int | None:
    """Try once to take the lock; None when another holds it."""
    while True:
        try:
            handle = os.open(side, os.O_CREAT | os.O_RDWR, 0o666)
        except OSError as trouble:
            raise _no_lock(name, trouble) from trouble
        kept = False
        try:
            if not _grab(handle):
                return None
            if _is_same(handle, side):
                _sign(handle)
                kept = True
                return handle
        except OSError as trouble:
            raise _no_lock(name, trouble) from trouble
        finally:
            if not kept:
                os.close(handle)


def _is_same(handle: int, side: Path) -> bool:
    """Tell whether the locked file still bears the name, or its holder just removed it."""
    try:
        return os.path.samestat(os.fstat(handle), side.stat())
    except FileNotFoundError:
        return False


def _sign(handle: int) -> None:
    """Write into the side file who holds it."""
    os.lseek(handle, 0, os.SEEK_SET)
    os.ftruncate(handle, 0)
    os.write(handle, f"{os.getpid()} {socket.gethostname()}\n".encode())


def _holder(side: Path) -> str:
    """Say who holds the lock, as far as it is known."""
    try:
        words = side.read_text(encoding="utf-8", errors="replace").split()
    except OSError:
        words = []
    if len(words) != 2 or not words[0].isdigit():
        return "another process"
    here = words[1] == socket.gethostname()
    if here and int(words[0]) == os.getpid():
        return "this same process"
    return f"process {words[0]}" if here else f"process {words[0]} on {words[1]}"


def _no_lock(name: str, trouble: OSError) -> FileTrouble:
    reason = (trouble.strerror or str(trouble)).lower()
    return FileTrouble(
        f"cannot be locked: {reason}.", where=name,
        hint="Work in a directory that can be written and allows locks.",
    )  # fmt: skip
