"""Requests and plans: the TOML files that say what to size, and what was sized.

It loads the model library, so import it inside the commands that need it.
"""

from __future__ import annotations

from gmid.request.plans import PlanFile, read_plan, write_plan
from gmid.request.process import Bench, Process, open_bench
from gmid.request.reading import read_request
from gmid.request.request import Request

__all__ = [
    "Bench",
    "PlanFile",
    "Process",
    "Request",
    "open_bench",
    "read_plan",
    "read_request",
    "write_plan",
]
