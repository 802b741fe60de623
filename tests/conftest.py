"""Fixtures that every test may use."""

from __future__ import annotations

import io
import json
import sys
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import pytest
from hypothesis import HealthCheck, settings

from gmid.cli.app import main

# The same examples every time, and none of them judged by the clock of a busy machine.
settings.register_profile(
    "house", deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow]
)
settings.load_profile("house")


@dataclass(frozen=True)
class Run:
    """What a command left behind."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """The JSON document on stdout."""
        return json.loads(self.out)


@pytest.fixture
def gmid(monkeypatch: pytest.MonkeyPatch) -> Callable[..., Run]:
    """Run the command line in this process."""

    def run(*words: object) -> Run:
        out, err = io.StringIO(), io.StringIO()
        with monkeypatch.context() as patch:
            patch.setattr(sys, "argv", ["gmid", *map(str, words)])
            patch.setattr(sys, "stdout", out)
            patch.setattr(sys, "stderr", err)
            code = 0
            try:
                main()
            except SystemExit as stop:
                code = int(stop.code or 0)
        return Run(code, out.getvalue(), err.getvalue())

    return run
