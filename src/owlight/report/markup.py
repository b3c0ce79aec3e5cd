"""Elements of a page. Plain text is escaped on its way in; only what `element` made passes unchanged."""

from __future__ import annotations

import html
from collections.abc import Sequence


class Markup(str):
    """Text that is already markup."""

    __slots__ = ()


Inside = str | Markup | None


def escaped(inside: Inside) -> str:
    if inside is None:
        return ""
    return inside if isinstance(inside, Markup) else html.escape(inside)


def element(tag: str, *inside: Inside, **attributes: object) -> Markup:
    """`class_` is written class, an underscore inside a name a hyphen; an attribute that is None is left out.

    >>> element("td", "a < b", class_="wide")
    '<td class="wide">a &lt; b</td>'
    """
    written = "".join(
        f' {name.rstrip("_").replace("_", "-")}="{html.escape(str(value))}"'
        for name, value in attributes.items()
        if value is not None
    )
    return Markup(f"<{tag}{written}>{''.join(escaped(part) for part in inside)}</{tag}>")


def together(*parts: Inside) -> Markup:
    return Markup("".join(escaped(part) for part in parts))


def listed(items: tuple[Inside, ...] | list[Inside]) -> Markup | None:
    """A list, or nothing when there is nothing to list."""
    return element("ul", *(element("li", item) for item in items)) if items else None


def table(
    heads: tuple[str, ...],
    rows: Sequence[tuple[Inside, ...]],
    numeric: frozenset[int] = frozenset(),
    kind: str | None = None,
) -> Markup:
    """Columns in `numeric` are set flush right. Each cell repeats its head, for narrow screens."""

    def flush(column: int) -> str | None:
        return "number" if column in numeric else None

    head = element("tr", *(element("th", text, scope="col", class_=flush(i)) for i, text in enumerate(heads)))
    body = (
        element("tr", *(element("td", c, class_=flush(i), data_head=heads[i]) for i, c in enumerate(row)))
        for row in rows
    )
    return element("table", element("thead", head), element("tbody", *body), class_=kind)
