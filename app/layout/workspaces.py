"""The list of workspaces, opened from the header."""

from dash import html


def workspace_sheet() -> html.Div:
    acts = (
        ("new-workspace", "new workspace"),
        ("rename-workspace", "rename"),
        ("duplicate-workspace", "duplicate"),
        ("export-workspace", "export as one file"),
        ("import-workspace", "open a file"),
        ("delete-workspace", "delete"),
    )
    return html.Div(
        className="workspaces",
        role="dialog",
        hidden=True,
        **{"aria-label": "Workspaces"},
        children=[
            html.Div(id="workspace-list", className="workspace-list"),
            html.Div([html.Button(words, className="quiet", **{"data-act": act}) for act, words in acts], className="workspace-acts"),
        ],
    )
