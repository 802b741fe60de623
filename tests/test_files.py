from __future__ import annotations

import errno
import os
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from gmid.errors import FileTrouble, UsageFault
from gmid.files import locked, locks, make_directory, whole, write_text, write_together, writing

posix = pytest.mark.skipif(sys.platform == "win32", reason="needs POSIX processes")


def start(code: str, *arguments: object) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, "-c", code, *map(str, arguments)],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        env={**os.environ, "PYTHONPATH": str(Path(whole.__file__).parents[2])},
    )  # fmt: skip


def names(folder: Path) -> list[str]:
    return sorted(entry.name for entry in folder.iterdir())


def test_a_file_appears_when_the_block_ends(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    with writing(target) as part:
        part.write_text("new")
        assert not target.exists()
        assert part.parent == tmp_path
        assert part.name.startswith(".")
    assert target.read_text() == "new"
    assert names(tmp_path) == ["a.txt"]
    plain = tmp_path / "plain"
    plain.touch()
    assert target.stat().st_mode == plain.stat().st_mode


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt, SystemExit])
def test_a_failing_block_leaves_the_old_file(tmp_path: Path, error: type[BaseException]) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")

    def fail() -> None:
        with writing(target, force=True) as part:
            part.write_text("half")
            raise error

    with pytest.raises(error):
        fail()
    assert target.read_text() == "old"
    assert names(tmp_path) == ["a.txt"]


def test_an_existing_file_needs_force(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")
    with pytest.raises(FileTrouble, match=r"a\.txt: already exists\. Give --force to replace it"):
        write_text(target, "new")
    assert target.read_text() == "old"
    target.chmod(0o640)
    write_text(target, "new\nline", force=True)
    assert target.read_bytes() == b"new\nline"
    assert target.stat().st_mode & 0o777 == 0o640


@pytest.mark.parametrize("links", [True, False])
def test_a_file_that_appears_meanwhile_is_not_clobbered(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, links: bool
) -> None:
    if not links:
        monkeypatch.setattr(os, "link", refuse_links)
    target = tmp_path / "a.txt"

    def race() -> None:
        with writing(target) as part:
            part.write_text("mine")
            target.write_text("theirs")

    with pytest.raises(FileTrouble, match="already exists"):
        race()
    assert target.read_text() == "theirs"
    assert names(tmp_path) == ["a.txt"]


def refuse_links(source: object, target: object) -> None:
    raise PermissionError(errno.EPERM, "Operation not permitted", str(source))


def test_without_hard_links_files_still_appear(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(os, "link", refuse_links)
    write_text(tmp_path / "a", "1")
    write_together({tmp_path / "a": "2", tmp_path / "b": "3"}, force=True)
    assert [(tmp_path / name).read_text() for name in names(tmp_path)] == ["2", "3"]


@posix
def test_of_many_writers_one_wins(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    code = (
        "import sys\nfrom gmid.files import writing\nfrom gmid.errors import FileTrouble\n"
        "try:\n with writing(sys.argv[1]) as part:\n"
        "  part.write_text(sys.argv[2]*10000); print('ready', flush=True); sys.stdin.read(1)\n"
        "except FileTrouble: sys.exit(7)\n"
    )
    env = {**os.environ, "PYTHONPATH": str(Path(whole.__file__).parents[2])}
    writers = [
        subprocess.Popen([sys.executable, "-c", code, str(target), mark], env=env, text=True,
                         stdin=subprocess.PIPE, stdout=subprocess.PIPE)
        for mark in "abc"
    ]  # fmt: skip
    for writer in writers:
        assert writer.stdout is not None
        assert writer.stdout.readline() == "ready\n"
    for writer in writers:
        writer.communicate("x", timeout=30)
    assert sorted(writer.returncode for writer in writers) == [0, 7, 7]
    codes = [writer.returncode for writer in writers]
    winner = "abc"[codes.index(0)]
    assert target.read_text() == winner * 10000
    assert names(tmp_path) == ["a.txt"]


@posix
def test_a_killed_writer_leaves_the_old_file_and_is_cleaned_up(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")
    code = (
        "import sys, time\nfrom gmid.files import writing\n"
        "with writing(sys.argv[1], force=True) as part:\n"
        " part.write_text('half'); print('ready', flush=True); time.sleep(60)\n"
    )
    with start(code, target) as writer:
        assert writer.stdout is not None
        assert writer.stdout.readline() == "ready\n"
        write_text(target, "older", force=True)  # a living writer's file is left alone
        assert len(names(tmp_path)) == 2
        writer.send_signal(signal.SIGKILL)
        writer.wait(30)
    assert target.read_text() == "older"
    assert len(names(tmp_path)) == 2
    write_text(target, "new", force=True)
    assert names(tmp_path) == ["a.txt"]
    assert target.read_text() == "new"


@posix
def test_a_full_disk_leaves_the_old_file(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")
    code = (
        "import resource, sys\nfrom gmid.files import write_text\n"
        "from gmid.errors import FileTrouble\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (4096, 4096))\n"
        "try: write_text(sys.argv[1], 'x'*100000, force=True)\n"
        "except FileTrouble as trouble: print(trouble)\n"
    )
    with start(code, target) as writer:
        told, complaint = writer.communicate(timeout=30)
    assert complaint == ""
    assert told == f"{target}: cannot be written: file too large. Make room, or write elsewhere.\n"
    assert target.read_text() == "old"
    assert names(tmp_path) == ["a.txt"]


def test_places_that_cannot_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    with pytest.raises(FileTrouble, match=r"there is no directory .*none\. Create it first"):
        write_text(tmp_path / "none" / "a.txt", "x")
    with pytest.raises(FileTrouble, match="is a directory, not a file"):
        write_text(tmp_path, "x", force=True)
    (tmp_path / "file").touch()
    with pytest.raises(FileTrouble, match="file is not a directory"):
        write_text(tmp_path / "file" / "a.txt", "x")
    with pytest.raises(FileTrouble, match="is a file, not a directory"):
        make_directory(tmp_path / "file")
    assert make_directory(tmp_path / "a" / "b").is_dir()

    def refuse(*_: object) -> int:
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr(os, "open", refuse)
    with pytest.raises(FileTrouble, match="cannot be written: permission denied"):
        write_text(tmp_path / "a.txt", "x")
    with (
        pytest.raises(FileTrouble, match="cannot be locked: permission denied"),
        locked(tmp_path / "a.txt", wait=0),
    ):
        pass


@posix
def test_devices_are_not_replaced_and_links_are_followed(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    with pytest.raises(FileTrouble, match="not a regular file"):
        write_text(tmp_path / "pipe", "x", force=True)
    (tmp_path / "real").write_text("old")
    (tmp_path / "link").symlink_to("real")
    write_text(tmp_path / "link", "new", force=True)
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "real").read_text() == "new"


def test_errors_of_other_files_pass_through(tmp_path: Path) -> None:
    with pytest.raises(FileNotFoundError), writing(tmp_path / "a.txt"):
        (tmp_path / "other").read_text()
    assert names(tmp_path) == []


def test_files_appear_together(tmp_path: Path) -> None:
    write_together({tmp_path / "a": "text", str(tmp_path / "b"): b"\x00"})
    assert (tmp_path / "a").read_text() == "text"
    assert (tmp_path / "b").read_bytes() == b"\x00"
    with pytest.raises(FileTrouble, match="b: already exists"):
        write_together({tmp_path / "new": "x", tmp_path / "b": "x"})
    with pytest.raises(UsageFault):
        write_together({tmp_path / "x": "1", tmp_path / "." / "x": "2", str(tmp_path / "x"): "3"})
    assert names(tmp_path) == ["a", "b"]


@pytest.mark.parametrize("force", [True, False])
@pytest.mark.parametrize("links", [True, False])
def test_a_set_is_taken_back_when_one_cannot_be_placed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, force: bool, links: bool
) -> None:
    if not links:
        monkeypatch.setattr(os, "link", refuse_links)
    if force:
        (tmp_path / "a").write_text("old")
    place = whole._place

    def place_until_c(job: whole._Job, force: bool) -> None:
        if job.target.name == "c":
            raise KeyboardInterrupt
        place(job, force)

    monkeypatch.setattr(whole, "_place", place_until_c)
    with pytest.raises(KeyboardInterrupt):
        write_together({tmp_path / name: "new" for name in "abc"}, force=force)
    assert names(tmp_path) == (["a"] if force else [])
    if force:
        assert (tmp_path / "a").read_text() == "old"


def test_a_set_never_takes_back_a_file_of_others(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    settle = whole._settle

    def settle_late(job: whole._Job) -> None:
        settle(job)
        (tmp_path / "b").write_text("theirs")

    monkeypatch.setattr(whole, "_settle", settle_late)
    with pytest.raises(FileTrouble, match="b: already exists"):
        write_together({tmp_path / "a": "mine", tmp_path / "b": "mine"})
    assert names(tmp_path) == ["b"]
    assert (tmp_path / "b").read_text() == "theirs"


HOLD = (
    "import sys, time\nfrom gmid.files import locked\n"
    "with locked(sys.argv[1], wait=5):\n"
    " print('held', flush=True); time.sleep(float(sys.argv[2]))\n"
)


@posix
def test_a_lock_held_elsewhere_is_waited_for(tmp_path: Path) -> None:
    target = tmp_path / "t.h5"
    told: list[str] = []
    with start(HOLD, target, 0.4) as holder:
        assert holder.stdout is not None
        assert holder.stdout.readline() == "held\n"
        with locked(target, wait=20, on_wait=told.append):
            assert holder.poll() is not None or holder.wait(10) == 0
        assert told == [f"Waiting for process {holder.pid} to finish with {target}."]
    assert names(tmp_path) == []


@posix
def test_a_lock_held_too_long_names_its_holder_and_dies_with_it(tmp_path: Path) -> None:
    target = tmp_path / "t.h5"
    with start(HOLD, target, 60) as holder:
        assert holder.stdout is not None
        assert holder.stdout.readline() == "held\n"
        began = time.monotonic()
        with (
            pytest.raises(FileTrouble, match=f"changed by process {holder.pid}; waited 0.2 s"),
            locked(target, wait=0.2),
        ):
            pass
        assert 0.19 < time.monotonic() - began < 5
        holder.send_signal(signal.SIGKILL)
        holder.wait(30)
    assert names(tmp_path) == [".t.h5.lock"]
    with locked(target, wait=0):
        pass
    assert names(tmp_path) == []


def test_threads_take_turns(tmp_path: Path) -> None:
    counter = tmp_path / "count"
    counter.write_text("0")

    def add() -> None:
        for _ in range(10):
            with locked(counter, wait=60):
                write_text(counter, str(int(counter.read_text()) + 1), force=True)

    workers = [threading.Thread(target=add) for _ in range(4)]
    for worker in workers:
        worker.start()
    for worker in workers:
        worker.join()
    assert counter.read_text() == "40"
    assert names(tmp_path) == ["count"]


@posix
def test_a_lock_on_a_name_just_removed_does_not_count(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    side = tmp_path / ".t.lock"
    grab, calls = locks._grab, 0

    def grab_as_the_holder_leaves(handle: int) -> bool:
        nonlocal calls
        calls += 1
        if calls == 1:
            side.unlink()
        return grab(handle)

    monkeypatch.setattr(locks, "_grab", grab_as_the_holder_leaves)
    with locked(tmp_path / "t", wait=0):
        assert side.read_text().startswith(f"{os.getpid()} ")
    assert calls == 2


def test_errors_of_libraries_are_told_shortly(tmp_path: Path) -> None:
    with pytest.raises(FileTrouble) as caught, writing(tmp_path / "a.h5"):
        raise OSError(errno.ENOSPC, "a library's long report")
    assert "cannot be written: no space left on device. Make room" in str(caught.value)


def test_a_lock_taken_twice_says_so(tmp_path: Path) -> None:
    with (
        locked(tmp_path / "t", wait=0),
        pytest.raises(FileTrouble, match="this same process"),
        locked(tmp_path / "t", wait=0),
    ):
        pass
