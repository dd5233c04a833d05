"""On which line of a TOML file an entry stands, for messages that name it."""

from __future__ import annotations

import re

__all__ = ["Lines"]


class Lines:
    """Finds the line of the n-th entry of a table and of a key in it; lines count from 1.

    Both ways of writing are known: `[[axis]]` with a key a line, and `axis = [{…}, {…}]`.
    """

    def __init__(self, text: str) -> None:
        self.rows = text.splitlines()

    def key(self, table: str, index: int, key: str | None = None) -> int | None:
        """The line of a key, else that of its entry, else None."""
        start, end = self._entry(table, index)
        if start is None:
            return None
        if key is not None:
            pattern = re.compile(rf"(^|[\s{{,])(\"{re.escape(key)}\"|{re.escape(key)})\s*=")
            for number in range(start, end + 1):
                if pattern.search(self.rows[number - 1]):
                    return number
        return start

    def _entry(self, table: str, index: int) -> tuple[int | None, int]:
        headers = [
            n
            for n, row in enumerate(self.rows, 1)
            if re.match(rf"\s*\[\[?\s*{re.escape(table)}\s*\]", row)
        ]
        if index < len(headers):
            start = headers[index]
            later = (n for n, row in enumerate(self.rows, 1) if n > start and _is_header(row))
            return start, next(later, len(self.rows) + 1) - 1
        return self._inline(table, index)

    def _inline(self, table: str, index: int) -> tuple[int | None, int]:
        """The n-th inline table of `table = [{…}, …]`: brackets counted outside quotes."""
        opening = re.compile(rf"\s*{re.escape(table)}\s*=")
        first = next((n for n, row in enumerate(self.rows, 1) if opening.match(row)), None)
        if first is None:
            return None, 0
        depth, seen, start = 0, -1, first
        for number in range(first, len(self.rows) + 1):
            for mark in re.findall(r"\"[^\"]*\"|'[^']*'|#.*|[\[\]{}]", self.rows[number - 1]):
                if mark == "{" and depth <= 1:
                    seen, start = seen + 1, number
                if mark in "{[":
                    depth += 1
                elif mark in "}]":
                    depth -= 1
                    if mark == "}" and depth <= 1 and seen == index:
                        return start, number
        return first, first


def _is_header(row: str) -> bool:
    return re.match(r"\s*\[\[?\s*[\w\"'.-]+\s*\]\]?\s*(#.*)?$", row) is not None
