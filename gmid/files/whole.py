"""Files that appear whole or not at all."""

from __future__ import annotations

import contextlib
import errno
import os
import re
import secrets
import socket
import stat
import sys
import zlib
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from gmid.errors import FileTrouble, UsageFault

_FULL = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG)
_NO_LINKS = (errno.EPERM, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS, errno.EMLINK)
_NO_SYNC = (errno.EINVAL, errno.ENOTSUP, errno.EBADF)
_live: set[Path] = set()


@dataclass(frozen=True)
class _Job:
    """One file on its way: as the caller named it, where it goes, where it is filled."""

    path: str | Path
    target: Path
    part: Path


@contextmanager
def writing(path: str | Path, *, force: bool = False) -> Iterator[Path]:
    """Write a file whole or not at all.

    Parameters
    ----------
    path : str or Path
        The file to appear.  A symbolic link is followed.
    force : bool
        Replace an existing file.

    Yields
    ------
    Path
        A hidden, empty file beside it, to be filled.  When the block ends it is moved into
        place; when the block fails or is interrupted it is removed.

    Raises
    ------
    FileTrouble
        If the file exists and is not to be replaced (also when it appears meanwhile), or
        cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     with writing(Path(folder) / "a.txt") as part:
    ...         _ = part.write_text("whole")
    ...     (Path(folder) / "a.txt").read_text()
    'whole'
    """
    job = _begin(path, _checked_target(path, force))
    try:
        with _told(job):
            yield job.part
            _settle(job)
            _place(job, force)
            _sync_directory(job.target.parent)
    finally:
        _drop(job.part)


def write_text(path: str | Path, text: str, *, force: bool = False) -> None:
    """Write a text file in UTF-8, whole or not at all.

    Parameters
    ----------
    path : str or Path
        The file to appear.
    text : str
        Its content; line ends are written as they are.
    force : bool
        Replace an existing file.

    Raises
    ------
    FileTrouble
        As `writing` does.

    Examples
    --------
    >>> write_text("no/such/place.txt", "x")
    Traceback (most recent call last):
        ...
    gmid.errors.FileTrouble: no/such/place.txt: there is no directory no/such. Create it first.
    """
    with writing(path, force=force) as part:
        part.write_bytes(text.encode("utf-8"))


def write_together(contents: Mapping[str | Path, str | bytes], *, force: bool = False) -> None:
    """Write several files so that all of them appear, or none.

    Everything is written to hidden files first; then each is moved into place, and those
    moved are taken back if one fails.  Only a crash between two moves can leave some new
    and some old files, each of them whole.

    Parameters
    ----------
    contents : mapping
        Text (UTF-8) or bytes of each path.
    force : bool
        Replace existing files.

    Raises
    ------
    FileTrouble
        As `writing` does.
    UsageFault
        If two paths are the same file.

    Examples
    --------
    >>> write_together({})
    """
    targets = {path: _checked_target(path, force) for path in contents}
    if len(set(targets.values())) < len(targets):
        raise UsageFault("two of the files to be written are the same file.")
    jobs: list[_Job] = []
    try:
        for path, content in contents.items():
            job = _begin(path, targets[path])
            jobs.append(job)
            with _told(job):
                raw = content.encode("utf-8") if isinstance(content, str) else content
                job.part.write_bytes(raw)
                _settle(job)
        _place_all(jobs, force)
    finally:
        for job in jobs:
            _drop(job.part)


def make_directory(path: str | Path) -> Path:
    """Create a directory, with those above it, unless it is there.

    Parameters
    ----------
    path : str or Path
        The directory.

    Returns
    -------
    Path
        The same.

    Raises
    ------
    FileTrouble
        If it cannot be created, or is a file.

    Examples
    --------
    >>> make_directory(".").is_dir()
    True
    """
    try:
        Path(path).mkdir(parents=True, exist_ok=True)
    except (FileExistsError, NotADirectoryError):
        raise FileTrouble("is a file, not a directory.", where=str(path)) from None
    except OSError as trouble:
        raise FileTrouble(
            f"the directory cannot be created: {_reason(trouble)}.", where=str(path)
        ) from trouble
    return Path(path)


def _checked_target(path: str | Path, force: bool) -> Path:
    """Refuse targets that cannot be written, and clear what a killed process left there."""
    target = Path(os.path.realpath(path))
    if not target.parent.is_dir():
        above = Path(path).parent
        if target.parent.exists():
            raise FileTrouble(f"{above} is not a directory.", where=str(path))
        raise FileTrouble(
            f"there is no directory {above}.", where=str(path), hint="Create it first."
        )
    if target.is_dir():
        raise FileTrouble("is a directory, not a file.", where=str(path))
    if target.exists():
        if not target.is_file():
            raise FileTrouble("is not a regular file, so it cannot be replaced.", where=str(path))
        if not force:
            raise _taken(path)
    _clear_leftovers(target)
    return target


def _taken(path: str | Path) -> FileTrouble:
    return FileTrouble("already exists.", where=str(path), hint="Give --force to replace it.")


def _host() -> str:
    return f"{zlib.crc32(socket.gethostname().encode()):08x}"


def _begin(path: str | Path, target: Path) -> _Job:
    """Create the hidden file in which the content is collected."""
    return _Job(path, target, _create_hidden(path, target, "part"))


def _create_hidden(path: str | Path, target: Path, kind: str) -> Path:
    """Create a hidden empty file beside the target, named after this process."""
    mark = f"{_host()}-{os.getpid()}-{secrets.token_hex(4)}"
    hidden = target.with_name(f".{target.name}.{mark}.{kind}")
    _live.add(hidden)
    try:
        os.close(os.open(hidden, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
    except OSError as trouble:
        _live.discard(hidden)
        raise FileTrouble(f"cannot be written: {_reason(trouble)}.", where=str(path)) from trouble
    return hidden


def _drop(part: Path) -> None:
    """Remove a hidden file if it is still there."""
    with contextlib.suppress(OSError):  # the answer matters more than a leftover
        part.unlink(missing_ok=True)
    _live.discard(part)


def _clear_leftovers(target: Path) -> None:
    """Remove hidden files of processes of this machine that are gone."""
    form = re.compile(rf"\.{re.escape(target.name)}\.{_host()}-(\d+)-[0-9a-f]{{8}}\.(part|old)")
    with contextlib.suppress(OSError):  # an unreadable directory is told when it is written
        for entry in list(target.parent.iterdir()):
            match = form.fullmatch(entry.name)
            if match is not None and entry not in _live and not _is_running(int(match[1])):
                entry.unlink(missing_ok=True)


def _is_running(process: int) -> bool:
    """Tell whether another process of that number exists; on Windows, assume so."""
    if process == os.getpid():
        return False
    if sys.platform == "win32":
        return True
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except (PermissionError, OverflowError):
        return True
    return True


@contextmanager
def _told(job: _Job) -> Iterator[None]:
    """Turn the system's errors about the file being written into `FileTrouble`."""
    try:
        yield
    except FileTrouble:
        raise
    except OSError as trouble:
        ours = trouble.filename is not None and str(trouble.filename) == str(job.part)
        if trouble.errno not in _FULL and not ours:
            raise
        raise FileTrouble(
            f"cannot be written: {_reason(trouble)}.", where=str(job.path),
            hint="Make room, or write elsewhere." if trouble.errno in _FULL else None,
        ) from trouble  # fmt: skip


def _reason(trouble: OSError) -> str:
    """Say what the system says of an error; libraries put whole reports in its text."""
    return (os.strerror(trouble.errno) if trouble.errno else str(trouble)).lower().rstrip(".")


def _settle(job: _Job) -> None:
    """Bring the content to the disk, and take over the rights of a file to be replaced."""
    handle = os.open(job.part, os.O_RDWR)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
    if job.target.exists():
        mode = stat.S_IMODE(job.target.stat().st_mode)
        if mode != stat.S_IMODE(job.part.stat().st_mode):
            job.part.chmod(mode)


def _place(job: _Job, force: bool) -> None:
    """Give the file its name; without `force`, only if no other has taken it meanwhile."""
    if force:
        os.replace(job.part, job.target)
        return
    try:
        os.link(job.part, job.target)
    except FileExistsError:
        raise _taken(job.path) from None
    except OSError as trouble:
        if trouble.errno not in _NO_LINKS:
            raise
        _claim(job)


def _claim(job: _Job) -> None:
    """Take the name with an empty file first, where there are no hard links."""
    try:
        os.close(os.open(job.target, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
    except FileExistsError:
        raise _taken(job.path) from None
    try:
        os.replace(job.part, job.target)
    except BaseException:
        job.target.unlink(missing_ok=True)
        raise


def _place_all(jobs: Sequence[_Job], force: bool) -> None:
    """Give all files their names, taking all back when one cannot be placed."""
    begun: list[_Job] = []
    kept: dict[Path, Path] = {}
    try:
        for job in jobs:
            with _told(job):
                if force and job.target.exists():
                    kept[job.target] = _keep(job)
                begun.append(job)
                _place(job, force)
    except BaseException:
        for job in reversed(begun):
            _take_back(job, kept.get(job.target))
        raise
    finally:
        for old in kept.values():
            _drop(old)
    for folder in {job.target.parent for job in jobs}:
        _sync_directory(folder)


def _keep(job: _Job) -> Path:
    """Keep the file to be replaced under a hidden name as well."""
    old = _create_hidden(job.path, job.target, "old")
    try:
        old.unlink()
        os.link(job.target, old)
    except OSError:  # a file system without hard links: keep a copy
        old.write_bytes(job.target.read_bytes())
    return old


def _take_back(job: _Job, old: Path | None) -> None:
    """Undo `_place`, whether or not it had come to its end."""
    if old is not None:
        os.replace(old, job.target)
    elif not job.part.exists() or (job.target.exists() and job.part.samefile(job.target)):
        job.target.unlink(missing_ok=True)


def _sync_directory(folder: Path) -> None:
    """Bring the new name to the disk, where the system can."""
    if sys.platform == "win32":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    except OSError as trouble:
        if trouble.errno not in _NO_SYNC:
            raise
    finally:
        os.close(handle)
