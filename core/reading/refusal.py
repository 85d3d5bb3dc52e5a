"""What the reader's parts raise among themselves; read_sweeps adds the file's name."""

from __future__ import annotations


class Refusal(Exception):
    """A file, sheet or table that cannot be used: what is wrong, where, and what to do."""

    def __init__(self, problem: str, remedy: str, *, line: int | None = None):
        super().__init__(problem)
        self.problem, self.remedy, self.line = problem, remedy, line


EXPORT_TEXT = "Export the sweep from the measuring software as text (CSV) and drop that file"
