"""Processor time, that of helping processes which have ended included."""

from __future__ import annotations

import resource
import time


def measure_spent() -> float:
    """Give the time spent so far, in seconds."""
    ended = resource.getrusage(resource.RUSAGE_CHILDREN)
    return time.process_time() + ended.ru_utime + ended.ru_stime
