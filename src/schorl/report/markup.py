"""Building HTML and SVG so that nothing from a file can become markup.

Text is escaped unless it was built here: :class:`Safe` marks what was.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from html import escape

#: Elements that have no end tag in HTML.
VOID = frozenset({"br", "hr", "img", "input", "link", "meta"})


class Safe(str):
    """Markup made by this module; anything else is text."""

    __slots__ = ()


def text(value: object) -> Safe:
    """Escape a value unless it is markup already; None is nothing."""
    if value is None:
        return Safe("")
    return value if isinstance(value, Safe) else Safe(escape(str(value), quote=True))


def join(parts: Iterable[object], between: str = "") -> Safe:
    """Escaped parts one after the other."""
    return Safe(text(between).join(text(part) for part in parts))


def tag(name: str, /, *children: object, **attributes: object) -> Safe:
    """An element; ``class_`` and ``for_`` lose their underscore, others become hyphens.

    An attribute that is None or False is left out, True stands by its name alone.

    >>> tag("p", "5 < 6", class_="note")
    '<p class="note">5 &lt; 6</p>'
    """
    words = [name]
    for key, value in attributes.items():
        if value is None or value is False:
            continue
        label = key.rstrip("_").replace("_", "-")
        words.append(label if value is True else f'{label}="{text(value)}"')
    if name in VOID:
        return Safe(f"<{' '.join(words)}>")
    return Safe(f"<{' '.join(words)}>{join(children)}</{name}>")


def shape(name: str, attributes: Mapping[str, object], *children: object) -> Safe:
    """An SVG element whose attribute names are given as they are (``viewBox``)."""
    words = [name]
    words += [f'{key}="{text(value)}"' for key, value in attributes.items() if value is not None]
    if not children:
        return Safe(f"<{' '.join(words)}/>")
    return Safe(f"<{' '.join(words)}>{join(children)}</{name}>")


def table(head: Iterable[object], rows: Iterable[Iterable[object]], *, caption: str) -> Safe:
    """A table with a caption for those who hear it; the first cell of a row is its head.

    Columns of figures are told by their cells, those that start with a digit or a sign, and keep
    to the right.
    """
    held = [list(row) for row in rows]
    figures = {
        place for row in held for place, cell in enumerate(row) if place and _is_figure(cell)
    }
    heads = [
        tag("th", cell, scope="col", class_="figure" if place in figures else None)
        for place, cell in enumerate(head)
    ]
    body = []
    for first, *rest in held:
        cells = [tag("th", first, scope="row")]
        cells += [tag("td", cell, class_="figure" if _is_figure(cell) else None) for cell in rest]
        body.append(tag("tr", *cells))
    inner = tag(
        "table",
        tag("caption", caption),
        tag("thead", tag("tr", *heads)),
        tag("tbody", *body),
    )
    return scrolled(inner, caption)


def scrolled(inner: Safe, name: str) -> Safe:
    """A box that scrolls sideways where a table is too wide, reachable by keyboard."""
    return tag("div", inner, class_="scroll", tabindex="0", role="group", aria_label=name)


def _is_figure(cell: object) -> bool:
    return (
        not isinstance(cell, Safe)
        and len(str(cell)) < 24
        and str(cell)[:1] in set("0123456789-−–<±+·")
    )
