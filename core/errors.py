"""Everything core raises on purpose; anything else that escapes is a bug.

SweepbenchError
├── UnreadableFile     a file that cannot be read as a sweep
├── ConditionRefused   a condition (area, temperature, …) that cannot be applied
├── ComparisonRefused  two states that cannot be compared mechanism by mechanism
│   └── BreakdownRefused  a sweep or fit that says nothing of its mechanisms
├── StepRefused        a change of the workspace that cannot be made
│   └── StaleRevision  the workspace has moved on; read it again
├── FitFailed          a fit that cannot be made or did not settle
└── StoreFailed        the workspace on disk cannot be read or written

The text of each is a sentence for the user: what is wrong, where, and what to do.
"""


class SweepbenchError(Exception):
    """Root of the errors that are meant for the user's eyes."""


class UnreadableFile(SweepbenchError, ValueError):
    """Says what is wrong with a file, where, and how to mend it."""

    def __init__(self, problem: str, *, file: str, line: int | None = None, remedy: str):
        where = file if line is None else f"{file}, line {line}"
        super().__init__(f"{where}: {problem}. {remedy}.")
        self.file, self.line = file, line


class ConditionRefused(SweepbenchError, ValueError):
    """A measuring condition that cannot be applied to a sweep."""


class ComparisonRefused(SweepbenchError, ValueError):
    """Two states that cannot be compared mechanism by mechanism."""


class BreakdownRefused(ComparisonRefused):
    """A sweep or a fit that says nothing of its mechanisms; what was measured stands all the same."""


class StepRefused(SweepbenchError):
    """A change that the workspace cannot make."""


class StaleRevision(StepRefused):
    """The change was made on a state that is no longer the current one."""

    def __init__(self, seen: int, current: int):
        super().__init__(
            "This workspace was changed elsewhere in the meantime, so your last change was not made. "
            "The screen now shows the current state; please make the change again."
        )
        self.seen, self.current = seen, current


class FitFailed(SweepbenchError):
    """A fit that cannot be made, or that did not settle."""


class StoreFailed(SweepbenchError):
    """The workspace on disk cannot be read or written."""
