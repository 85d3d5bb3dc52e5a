"""HTML as text, in which everything that is not markup by itself is escaped."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from html import escape


class Markup(str):
    """Text that is HTML already."""

    __slots__ = ()


def text(content: object) -> Markup:
    """Content as HTML: markup as it is, anything else escaped."""
    return content if isinstance(content, Markup) else Markup(escape(str(content)))


def element(tag: str, *content: object, **attributes: object) -> Markup:
    """An element; ``class_`` and ``data_x`` stand for ``class`` and ``data-x``, an attribute of None is left out."""
    written = "".join(
        f' {name.rstrip("_").replace("_", "-")}="{escape(str(value))}"' for name, value in attributes.items() if value is not None
    )
    return Markup(f"<{tag}{written}>{''.join(text(part) for part in content)}</{tag}>")


def join(parts: Iterable[object], between: str = "") -> Markup:
    return Markup(escape(between).join(text(part) for part in parts))


def symbol(name: str) -> Markup:
    """``Jsc`` with its index set low; a plain name as it is."""
    for letter, index in (("J", "sc"), ("I", "sc"), ("V", "oc"), ("J", "mp"), ("I", "mp"), ("V", "mp"), ("P", "mp"),
                          ("J", "ph"), ("I", "ph"), ("J", "0"), ("I", "0"), ("R", "s"), ("R", "sh"),
                          ("J", "01"), ("I", "01"), ("J", "02"), ("I", "02"), ("n", "1"), ("n", "2")):  # fmt: skip
        if name == letter + index:
            return Markup(f"<i>{letter}</i><sub>{index}</sub>")
    return Markup("<i>n</i>") if name == "n" else text(name)


def table(head: Sequence[object], rows: Iterable[Sequence[object]], class_: str = "") -> Markup:
    """A table whose first column heads its rows."""
    top = element("tr", *(element("th", cell, scope="col") for cell in head))
    body = [element("tr", element("th", first, scope="row"), *(element("td", cell) for cell in rest)) for first, *rest in rows]
    return element("table", element("thead", top), element("tbody", *body), class_=class_ or None)


def paragraph(*content: object, class_: str | None = None) -> Markup:
    return element("p", *content, class_=class_)
