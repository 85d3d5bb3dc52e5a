"""Parts of the page that no callback touches, sent as plain values for the page's own script to build.

Each component costs the framework a millisecond or two at the first load, and a little more at every change
of any other; most of the page is headings, tables and labels, which need none of that.
"""

from __future__ import annotations

import json
from copy import copy
from typing import Any

from dash.development.base_component import Component

from app.ids import Id

ATTRIBUTE = "data-still"  # JSON: a list of text and [tag, attributes, children]
_HTML = "dash_html_components"
_WIRED = frozenset(Id)
_SPELLINGS = {"className": "class", "htmlFor": "for"}


def still(component: Component) -> Component:
    """The component with its still children folded into one attribute, wherever they are.

    What no page script may find must not be left out: ids and all other attributes stay.
    """
    children = _listed(component)
    if component._namespace != _HTML or not any(isinstance(child, Component) for child in children):
        return component
    folded = copy(component)
    if all(_is_still(child) for child in children):
        del folded.children
        setattr(folded, ATTRIBUTE, json.dumps([_plain(child) for child in children], ensure_ascii=False))
    else:
        folded.children = [still(child) if isinstance(child, Component) else child for child in children]
    return folded


def _listed(component: Component) -> list[Any]:
    children = getattr(component, "children", None)
    if children is None:
        return []
    return list(children) if isinstance(children, list | tuple) else [children]


def _is_still(part: Any) -> bool:
    if not isinstance(part, Component):
        return part is None or isinstance(part, str | int | float)
    return (
        part._namespace == _HTML
        and getattr(part, "id", None) not in _WIRED
        and not hasattr(part, "style")
        and all(map(_is_still, _listed(part)))
    )


def _plain(part: Any) -> Any:
    if not isinstance(part, Component):
        return "" if part is None else str(part)
    properties = part.to_plotly_json()["props"]
    attributes = {
        _SPELLINGS.get(name, name if "-" in name else name.lower()): "" if value is True else str(value)
        for name, value in properties.items()
        if name != "children" and value is not None and value is not False
    }
    return [part._type.lower(), attributes, [_plain(child) for child in _listed(part)]]
