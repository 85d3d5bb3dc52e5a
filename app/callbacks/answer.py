"""How every change answers the page: the revision that now stands, and a sentence if there is one to say."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from app.answers import sentence_for
from core.errors import StaleRevision, StoreFailed
from core.store import Store
from core.workspace import Workspace

Change = Callable[[], tuple[Workspace, str]]


def answered(store: Store, workspace_id: str, change: Change, *, event: str | None = None) -> dict[str, Any]:
    """Make the change and report; an error becomes its sentence, and nothing has changed.

    Bugs too: a page that never heard of its event would send it again for ever.

    Parameters
    ----------
    change : callable
        Returns the workspace after the change and a sentence, or "".
    event : str, optional
        Name of the page's event, given back so that the page knows it was heard.

    Returns
    -------
    dict
        Workspace and revision that now stand, the event, the sentence, and the outcome: ``done``, ``refused``, or
        ``stale`` where the workspace had moved on, so that what waits in the page behind this event must not be made.
    """
    outcome = "done"
    try:
        workspace, sentence = change()
    except Exception as error:
        workspace, sentence = _standing(store, workspace_id), sentence_for(error)
        outcome = "stale" if isinstance(error, StaleRevision) else "refused"
    where = {"workspace": workspace.id, "revision": workspace.revision}
    return {**where, "event": event, "outcome": outcome, "sentence": sentence}


def _standing(store: Store, workspace_id: str) -> Workspace:
    """The workspace as it stands, or the last used one where another tab has deleted it."""
    try:
        return store.current(workspace_id)
    except StoreFailed:
        return store.current(store.first())
