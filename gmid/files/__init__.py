"""Files: whole-or-nothing writing, and locks for those that several commands change."""

from __future__ import annotations

from gmid.files.locks import locked
from gmid.files.whole import make_directory, write_text, write_together, writing

__all__ = ["locked", "make_directory", "write_text", "write_together", "writing"]
