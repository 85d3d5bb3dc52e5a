"""Steps on what the user states of the whole workspace."""

from __future__ import annotations

from .applying import Step, make_step
from .errors import ConditionRefused
from .statements import STATEMENTS, Statement
from .workspace import Workspace


def state(workspace: Workspace, name: str, value: float | bool | str | None) -> Step | None:
    """State something of every sweep, or take it back; None where nothing changes.

    Parameters
    ----------
    name : str
        One of ``core.statements.STATEMENTS``.
    value : float, bool, str or None
        As in ``Statement``; None, False or "" take it back.

    Raises
    ------
    ConditionRefused
        If that cannot be stated.
    """
    if name not in STATEMENTS:
        raise ConditionRefused(f"Nothing called “{name}” can be stated.")
    if isinstance(value, str):
        value = " ".join(value.split())
    statement = None if value is None or value is False or value == "" else Statement(name, value)
    if statement == workspace.statements.get(name):
        return None
    return make_step(f"state {STATEMENTS[name]}", statements={name: statement})
