"""The application: one Dash app with its four ways in (files, callbacks, the live route, jobs)."""

from __future__ import annotations

import contextlib
import logging

from dash import Dash, set_props

from core.errors import StoreFailed, SweepbenchError
from core.store import Store
from core.tables import FIRST_NAME
from core.workspace import Workspace

from . import callbacks, files, live
from .door import Door
from .ids import Id
from .jobs import Jobs
from .layout.page import page
from .layout.still import still
from .mechanisms import style_sheet
from .places import ASSETS

INDEX = """<!DOCTYPE html>
<html lang="en">
<head>{%metas%}<title>{%title%}</title>{%favicon%}<style>STYLE</style>{%css%}</head>
<body>{%app_entry%}<footer>{%config%}{%scripts%}{%renderer%}</footer></body>
</html>"""


def create_app(store: Store, door: Door, jobs: Jobs) -> Dash:
    """The app on a store; everything it needs is passed in, so that two of them live side by side."""
    app = Dash(
        "app",
        title="Sweepbench",
        update_title="",
        assets_folder=str(ASSETS),
        index_string=INDEX.replace("STYLE", style_sheet()),
        on_error=say_what_went_wrong,
        enable_mcp=False,
        add_log_handler=False,
        csrf_token_name=door.csrf_cookie,
    )

    def layout():
        workspace = first_readable(store)
        return still(page(workspace.id, workspace.revision, token_cookie=door.csrf_cookie))

    app.layout = layout
    for activity in callbacks.ACTIVITIES:
        activity.register(app, store, jobs)
    live.register(app.server, store)
    files.register(app.server, store)
    _complete(app)
    door.guard(app.server)
    return app


def _complete(app: Dash) -> None:
    """Let Dash find assets and callbacks now.

    It would do so on the first request, and a second one that came meanwhile (a browser asks for the page and its icon
    at once) would get a page without style sheets and scripts.
    """
    with app.server.test_request_context():
        app.server.preprocess_request()


def first_readable(store: Store) -> Workspace:
    """The workspace used last, or the next one if that is damaged: a page can then still open, and say so."""
    for info in store.workspaces():
        with contextlib.suppress(StoreFailed):
            return store.current(info.id)
    return store.current(store.create(FIRST_NAME))


def say_what_went_wrong(error: Exception) -> None:
    """An expected error is told as it is; a bug goes to the log, and the user hears that it happened."""
    if isinstance(error, SweepbenchError):
        sentence = str(error)
    else:
        logging.getLogger("sweepbench").error("A callback failed", exc_info=error)
        sentence = "Something went wrong inside Sweepbench; your last change may not have been made. The log has the details."
    set_props(Id.NOTICE, {"data": {"sentence": sentence}})
