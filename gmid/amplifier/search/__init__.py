"""From demands to a plan: closed forms to narrow, exact analysis to decide."""

from __future__ import annotations

from gmid.amplifier.search.find import SearchResult, find_plan

__all__ = ["SearchResult", "find_plan"]
