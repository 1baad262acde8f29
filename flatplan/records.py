"""The short text and HTML form that every record of the package shares, and checks used everywhere."""

from __future__ import annotations

import html
from collections.abc import Iterable, Sequence
from typing import Any


class Record:
    """Base of the frozen records: a title and rows of (what, value) shown as text or as a table.

    A subclass gives `_title` and `_rows`; nothing else is needed for notebooks to show it well.
    """

    def _title(self) -> str:
        return type(self).__name__

    def _rows(self) -> Iterable[tuple[str, str]]:
        return ()

    def __repr__(self) -> str:
        rows = list(self._rows())
        width = max((len(what) for what, _ in rows), default=0)
        return "\n".join([self._title(), *(f"  {what:<{width}}  {value}" for what, value in rows)])

    def _repr_html_(self) -> str:
        body = "".join(
            f'<tr><th style="text-align:left">{html.escape(what)}</th>'
            f'<td style="text-align:left">{html.escape(value)}</td></tr>'
            for what, value in self._rows()
        )
        return f"<table><caption>{html.escape(self._title())}</caption>{body}</table>"


def quoted(value: Any, longest: int = 60) -> str:
    """``value`` as an error sentence quotes it: its repr on one line, cut where it is long.

    >>> quoted("3 apples")
    "'3 apples'"
    >>> quoted(list(range(100)), longest=20)
    '[0, 1, 2, 3, 4, 5...'
    """
    try:
        words = " ".join(repr(value[: 2 * longest] if isinstance(value, (str, bytes)) else value).split())
    except (TypeError, ValueError):  # a quantity with fractional exponents cannot be printed; nor a whole number of 5000 digits
        return f"a {type(value).__name__}"
    return words if len(words) <= longest else words[: longest - 3] + "..."


def of_type(value: Any, kind: type | tuple[type, ...], name: str, takes: str) -> Any:
    """``value`` if it is of the type asked for, else one sentence naming the argument."""
    if not isinstance(value, kind):
        raise TypeError(f"{name}: got {type(value).__name__}; it takes {takes}.")
    return value


def one_of(value: Any, choices: Sequence[str], name: str) -> str:
    """``value`` if it is one of ``choices``, else one sentence listing them."""
    if not isinstance(value, str) or value not in choices:
        raise ValueError(f"{name}: got {quoted(value)}; it takes one of {', '.join(map(repr, choices))}.")
    return value
