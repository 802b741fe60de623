"""Processes side by side: the same answers, and nothing left behind."""

from __future__ import annotations

import multiprocessing
import os
import signal
import subprocess
import sys
import time

import numpy as np
import pytest

from gmid.amplifier.crew import Crew, count_processes
from gmid.amplifier.search.example import example_search
from gmid.errors import NoSolution, OutOfReach

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="processes are forked on Linux")


def add(shared, job):
    return shared["offset"] + job


def tell_process(shared, job):
    time.sleep(0.05)
    return os.getpid()


def refuse(shared, job):
    raise OutOfReach(f"{job} is out of reach.", hint="Ask for less.")


def die(shared, job):
    os.kill(os.getpid(), signal.SIGKILL)


def nest(shared, job):
    return shared.run(add_one, [job, job])


def add_one(shared, job):
    return job + 1


def test_answers_come_in_the_order_of_the_jobs():
    with Crew({"offset": 10}, size=2) as crew:
        assert crew.run(add, range(20)) == list(range(10, 30))
        assert len(set(crew.run(tell_process, range(8)))) == 2
        assert os.getpid() not in crew.run(tell_process, range(4))


def test_one_job_or_one_process_stays_here():
    with Crew(None, size=2) as crew:
        assert crew.run(tell_process, [0]) == [os.getpid()]
    assert crew.run(tell_process, [0, 1]) == [os.getpid()] * 2
    assert Crew(None, size=1).run(tell_process, [0, 1]) == [os.getpid()] * 2


def test_one_of_a_crew_opens_none_of_its_own():
    crew = Crew(None, size=2)
    crew._shared = crew
    with crew:
        assert crew.run(nest, [1, 5]) == [[2, 2], [6, 6]]


def test_errors_keep_their_words():
    with Crew(None, size=2) as crew, pytest.raises(OutOfReach, match="3 is out of reach") as caught:
        crew.run(refuse, [3, 4])
    assert caught.value.hint == "Ask for less."


def test_a_process_ended_from_outside_is_told():
    with Crew(None, size=2) as crew, pytest.raises(NoSolution, match="ended from outside"):
        crew.run(die, [1, 2])


def test_nothing_is_left_behind():
    with Crew(None, size=2) as crew:
        seen = set(crew.run(tell_process, range(8)))
    for process in seen:
        with pytest.raises(ProcessLookupError):
            os.kill(process, 0)


def test_processes_end_with_a_killed_parent(tmp_path):
    script = tmp_path / "parent.py"
    script.write_text(
        "import os, time\n"
        "from gmid.amplifier.crew import Crew\n"
        "def tell(shared, job):\n"
        "    time.sleep(0.05)\n"
        "    return os.getpid()\n"
        "crew = Crew(None, size=2)\n"
        "print(*set(crew.run(tell, range(8))), flush=True)\n"
        "time.sleep(60)\n"
    )
    with subprocess.Popen([sys.executable, str(script)], stdout=subprocess.PIPE) as parent:
        assert parent.stdout is not None
        seen = [int(word) for word in parent.stdout.readline().split()]
        parent.kill()
        parent.wait()
    deadline = time.monotonic() + 10
    while any(is_running(one) for one in seen) and time.monotonic() < deadline:
        time.sleep(0.1)
    assert len(seen) == 2
    assert not any(is_running(one) for one in seen)


def is_running(process):
    try:
        with open(f"/proc/{process}/stat", encoding="ascii") as file:
            return file.read().rsplit(")", 1)[1].split()[0] != "Z"
    except FileNotFoundError:
        return False


def test_children_that_may_have_no_children_work_alone():
    context = multiprocessing.get_context("fork")
    with context.Pool(1) as pool:
        assert pool.apply(count_processes) == 1


def test_a_search_finds_the_same_with_one_process_and_with_two(monkeypatch):
    rows = []
    for size in (1, 2):
        monkeypatch.setattr("gmid.amplifier.crew.count_processes", lambda size=size: size)
        _, best = example_search().run()
        rows.append((best.row, best.cost))
    np.testing.assert_array_equal(rows[0][0], rows[1][0])
    assert rows[0][1] == rows[1][1]
