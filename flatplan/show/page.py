"""A self-contained HTML page, built so that text cannot become markup: everything is escaped unless it is an element."""

from __future__ import annotations

import base64
import html
from collections.abc import Iterable, Sequence
from typing import Any

from flatplan.show.page_style import CSS

_VOID = {"img", "br", "meta", "hr", "col"}


class Markup(str):
    """Text that is HTML already; only functions of this module make it."""

    __slots__ = ()


def escaped(value: Any) -> Markup:
    """Any text as HTML; markup stays as it is."""
    return value if isinstance(value, Markup) else Markup(html.escape(str(value)))


def joined(parts: Iterable[Any]) -> Markup:
    """Pieces one after another."""
    return Markup("".join(escaped(part) for part in parts))


def element(name: str, /, *children: Any, **attributes: Any) -> Markup:
    """An element; a trailing underscore in an attribute's name is dropped (``class_``).

    >>> element("p", "3 < 4", class_="note")
    '<p class="note">3 &lt; 4</p>'
    """
    words = "".join(f' {key.rstrip("_")}="{html.escape(str(value))}"' for key, value in attributes.items() if value is not None)
    if name in _VOID:
        return Markup(f"<{name}{words}>")
    return Markup(f"<{name}{words}>{joined(children)}</{name}>")


def paragraphs(text: str, **attributes: Any) -> Markup:
    """Text of a user's own: a blank line begins a new paragraph."""
    blocks = [block.strip() for block in text.replace("\r\n", "\n").split("\n\n")]
    return joined(element("p", block, **attributes) for block in blocks if block)


def bullets(items: Iterable[Any], name: str = "ul") -> Markup:
    """A list."""
    return element(name, *(element("li", item) for item in items))


def table(
    head: Sequence[Any], rows: Iterable[Sequence[Any]], caption: str, *, numbers: Sequence[bool] = (), class_: str | None = None
) -> Markup:
    """A table with a caption; the first cell of a row is its header.

    Parameters
    ----------
    head : sequence
        One title per column.
    rows : iterable of sequences
    caption : str
    numbers : sequence of bool
        Which columns hold numbers (aligned right); none by default.
    class_ : str, optional
    """
    right = [bool(numbers[i]) if i < len(numbers) else False for i in range(len(head))]

    def cell(i: int, value: Any) -> Markup:
        style = "n" if right[i] else None
        return element("th", value, scope="row", class_=style) if i == 0 else element("td", value, class_=style)

    top = element("tr", *(element("th", words, scope="col", class_="n" if right[i] else None) for i, words in enumerate(head)))
    body = "\n".join(element("tr", *(cell(i, value) for i, value in enumerate(row))) for row in rows)
    inside = element(
        "table", element("caption", caption), element("thead", top), element("tbody", Markup("\n" + body + "\n")), class_=class_
    )
    return _wide(inside)


def _wide(inside: Markup) -> Markup:
    """A box that scrolls by itself where the screen is too narrow for the table in it."""
    return element("div", inside, class_="wide")


def facts(pairs: Iterable[tuple[Any, Any]], caption: str) -> Markup:
    """Two columns, what and how much."""
    rows = [element("tr", element("th", what, scope="row"), element("td", value)) for what, value in pairs]
    return _wide(element("table", element("caption", caption), element("tbody", *rows), class_="facts"))


def picture(svg: bytes, alternative: str, caption: str) -> Markup:
    """A figure inside the page; as an image of its own, so that names inside two drawings cannot collide."""
    return element("figure", image(svg, alternative), element("figcaption", caption))


def image(svg: bytes, alternative: str, style: str | None = None) -> Markup:
    """A drawing inside a line or cell."""
    source = "data:image/svg+xml;base64," + base64.b64encode(svg).decode("ascii")
    return element("img", src=source, alt=alternative, style=style)


def section(title: str, *children: Any, anchor: str) -> Markup:
    """A part of the page with a heading."""
    return element("section", element("h2", title), *children, id=anchor)


def document(title: str, body: Iterable[Markup]) -> str:
    """The whole page as text."""
    head = [
        element("meta", charset="utf-8"),
        element("meta", name="viewport", content="width=device-width, initial-scale=1"),
        # nothing may be fetched from anywhere, whatever the text says
        Markup("<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; img-src data:; style-src 'unsafe-inline'\">"),
        element("title", title),
        element("style", Markup(CSS)),
    ]
    inside = joined(Markup(part + "\n") for part in body)
    return (
        f'<!DOCTYPE html>\n<html lang="en">\n<head>\n{joined(Markup(h + chr(10)) for h in head)}</head>\n<body>\n{inside}</body>\n</html>\n'
    )
