"""What the decoding child says when it will not open a file."""

from __future__ import annotations

__all__ = ["Refusal"]


class Refusal(Exception):
    """`kind` is "open" or "limit", then what was found and a remedy."""

    def __init__(self, kind: str, what: str, remedy: str) -> None:
        super().__init__(kind, what, remedy)
