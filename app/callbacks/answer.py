"""How every change answers the page: the revision that now stands, and a sentence if there is one to say."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from core.errors import SweepbenchError
from core.store import Store
from core.workspace import Workspace

Change = Callable[[], tuple[Workspace, str]]


def answered(store: Store, workspace_id: str, change: Change, *, event: str | None = None) -> dict[str, Any]:
    """Make the change and report; an expected error becomes its sentence, and nothing has changed.

    Parameters
    ----------
    change : callable
        Returns the workspace after the change and a sentence, or "".
    event : str, optional
        Name of the page's event, given back so that the page knows it was heard.
    """
    try:
        workspace, sentence = change()
    except SweepbenchError as error:
        workspace, sentence = store.current(workspace_id), str(error)
    return {"workspace": workspace.id, "revision": workspace.revision, "event": event, "sentence": sentence}
