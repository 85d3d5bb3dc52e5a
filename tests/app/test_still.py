"""The page that is sent says the same as the page that is laid out; only how it is written differs."""

import json

from dash import dcc, html
from dash.development.base_component import Component

from app.ids import Id
from app.layout.page import page
from app.layout.still import ATTRIBUTE, still

WHOLE = page("workspace", 3, token_cookie="token")
SENT = still(WHOLE)


def parts(component):
    return [part for part in (component, *component._traverse()) if isinstance(part, Component)]


def words(component):
    """All text of a page in order, folded or not."""
    if isinstance(component, str):
        return [component]
    if isinstance(component, list | tuple):
        return [word for each in component for word in words(each)]
    if not isinstance(component, Component):
        return [] if component is None else [str(component)]
    folded = getattr(component, ATTRIBUTE, None)
    return words(getattr(component, "children", None)) + (folded_words(json.loads(folded)) if folded else [])


def folded_words(children):
    return [word for each in children for word in ([each] if isinstance(each, str) else folded_words(each[2]))]


def test_every_word_stays_in_its_order():
    assert words(SENT) == words(WHOLE)


def test_what_callbacks_use_stays_a_component_and_most_of_the_rest_does_not():
    assert {str(name) for name in Id} <= {str(getattr(part, "id", "")) for part in parts(SENT)}
    assert len(parts(SENT)) < len(parts(WHOLE)) / 3


def test_the_page_that_was_laid_out_is_left_alone():
    assert not [part for part in parts(WHOLE) if hasattr(part, ATTRIBUTE)]


def test_attributes_are_written_as_html_has_them():
    row = html.Td("1", className="value", colSpan=2, hidden=True, **{"data-column": "a"})
    (folded,) = json.loads(getattr(still(html.Div(html.Tr(row))), ATTRIBUTE))
    assert folded == ["tr", {}, [["td", {"class": "value", "colspan": "2", "hidden": "", "data-column": "a"}, ["1"]]]]


def test_a_child_with_a_wired_id_or_of_another_library_keeps_its_parents_whole():
    mixed = html.Div([html.P(html.B("still")), html.Div([html.Button(id=Id.UNDO), html.I("i")]), dcc.Store(id="x")])
    kept = still(mixed)
    assert hasattr(kept.children[0], ATTRIBUTE)
    assert kept.children[1].children[0].id == Id.UNDO and kept.children[2].id == "x"
    assert not hasattr(kept, ATTRIBUTE)
