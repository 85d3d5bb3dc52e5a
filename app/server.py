"""The application: one Dash app with its four ways in (files, callbacks, the live route, jobs)."""

from __future__ import annotations

import logging

from dash import Dash, set_props

from core.errors import SweepbenchError
from core.store import Store

from . import callbacks, files, live
from .door import Door
from .ids import Id
from .jobs import Jobs
from .layout.page import page
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
        workspace_id = store.first()
        return page(workspace_id, store.current(workspace_id).revision, token_cookie=door.csrf_cookie)

    app.layout = layout
    for activity in callbacks.ACTIVITIES:
        activity.register(app, store, jobs)
    live.register(app.server, store)
    files.register(app.server, store)
    door.guard(app.server)
    return app


def say_what_went_wrong(error: Exception) -> None:
    """An expected error is told as it is; a bug goes to the log, and the user hears that it happened."""
    if isinstance(error, SweepbenchError):
        sentence = str(error)
    else:
        logging.getLogger("sweepbench").error("A callback failed", exc_info=error)
        sentence = "Something went wrong inside Sweepbench; your last change may not have been made. The log has the details."
    set_props(Id.NOTICE, {"data": {"sentence": sentence}})
