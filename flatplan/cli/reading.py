"""Tables of a case file turned into records, with refusals carried to the line and key they come from."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Any


class CaseError(ValueError):
    """Bad input in a case file; the message names file, line and key."""


class Reader:
    """Turns the tables of one file into records and its errors into places in that file."""

    def __init__(self, text: str, name: str) -> None:
        self.lines = text.splitlines()
        self.name = name

    # --- errors --------------------------------------------------------------------------------

    def fail(self, section: str, key: str, message: str, index: int = 0) -> CaseError:
        place = f"[{section}] " if section else ""
        line = self.line_of(section, key, index)
        if line is None and "." in section:  # an inline table stands on a line of its parent
            parent, _, name = section.rpartition(".")
            line = self.line_of(parent, name, index)
        at = f", line {line}" if line else ""
        return CaseError(f"{self.name}{at}: {place}{message}")

    def line_of(self, section: str, key: str, index: int = 0) -> int | None:
        """Line of ``key`` in the index-th table named ``section``; of the table's head where the key is not there."""
        head = re.compile(rf"\s*\[\[?\s*{re.escape(section)}\s*\]\]?\s*(#.*)?") if section else None
        start, seen = (None, -1) if head else (0, 0)
        for number, line in enumerate(self.lines, 1):
            if head and head.fullmatch(line):
                seen += 1
                if seen == index:
                    start = number
            elif start is not None and seen == index:
                if re.match(r"\s*\[", line):
                    break
                if re.match(rf"\s*{re.escape(key)}\s*=", line):
                    return number
        return start or None

    def call(self, section: str, maker: Callable[..., Any], table: dict, index: int = 0) -> Any:
        """``maker(**table)`` with its refusal carried to the line of the key it names."""
        try:
            return maker(**table)
        except (ValueError, TypeError) as error:
            named = str(error).split(":", 1)[0].split("[", 1)[0]
            key = next((k for k in table if k == named or named.endswith(k)), next(iter(table), ""))
            raise self.fail(section, key, str(error), index) from None

    def known(self, section: str, table: Any, allowed: tuple[str, ...], index: int = 0) -> dict:
        if not isinstance(table, dict):
            raise self.fail("", section, f"{section}: got {table!r}; it takes a table.")
        for key in table:
            if key not in allowed:
                raise self.fail(section, key, f"{key}: is not a key here; there are {', '.join(allowed)}.", index)
        return table

    def need(self, section: str, table: dict, key: str, index: int = 0) -> Any:
        if key not in table:
            raise self.fail(section, key, f"{key}: is missing.", index)
        return table[key]
