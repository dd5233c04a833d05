"""A child process that decodes files under limits, so that a hostile file cannot hurt the caller.

The child gets one line of JSON per request on its standard input and answers with one line of
JSON and the raw arrays that it announces. Nothing that it sends is ever executed or unpickled.
"""

from __future__ import annotations

import contextlib
import json
import subprocess
import sys
import threading
from dataclasses import asdict
from pathlib import Path
from typing import Any

from curvefit.errors import ChartError, LimitError, OpenError
from curvefit.load.limits import Limits

__all__ = ["Guard"]

Answer = tuple[dict[str, Any], list[bytes]]
ERRORS = {"open": OpenError, "limit": LimitError}


class Guard:
    """The decoding child of one file; a context manager."""

    def __init__(self, path: Path, kind: str, limits: Limits) -> None:
        self._limits = limits
        self._late = False
        script = Path(__file__).with_name("child.py")
        # -S and -E: the child searches exactly where this process does, and starts sooner
        self._child = subprocess.Popen(
            [sys.executable, "-S", "-E", str(script)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
        )
        # the home of this package first, whatever way it was put on the path
        home = str(Path(__file__).resolve().parents[2])
        self._start = {
            "search": [home, *(p for p in sys.path if p)],
            "path": str(path.resolve()),
            "kind": kind,
            "limits": asdict(limits),
        }

    def __enter__(self) -> Guard:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """End the child."""
        self._child.kill()
        self._child.wait()
        for pipe in (self._child.stdin, self._child.stdout):
            if pipe is not None:
                with contextlib.suppress(OSError):  # bytes for a child that is gone
                    pipe.close()

    def open(self) -> dict[str, Any]:
        """What the child says of the file as a whole: its number of pages."""
        return self._ask(self._start)[0]

    def page(self, number: int) -> Answer:
        """One page, from 1: its description and its arrays as raw bytes."""
        return self._ask({"page": number})

    def _ask(self, request: dict[str, Any]) -> Answer:
        timer = threading.Timer(self._limits.seconds, self._too_late)
        timer.daemon = True
        timer.start()
        try:
            answer = self._exchange(request)
        finally:
            timer.cancel()
        if answer is None:
            raise self._broken()
        error = answer[0].get("error")
        if error is not None:
            raise _error(error)
        return answer

    def _too_late(self) -> None:
        self._late = True
        self._child.kill()

    def _exchange(self, request: dict[str, Any]) -> Answer | None:
        """The child's answer; None where it ended before it had answered."""
        stdin, stdout = self._child.stdin, self._child.stdout
        assert stdin is not None
        assert stdout is not None
        try:
            stdin.write(json.dumps(request).encode() + b"\n")
            stdin.flush()
        except OSError:
            return None
        line = stdout.readline(1 << 24)
        if not line.endswith(b"\n"):
            return None
        header = json.loads(line)
        arrays = [stdout.read(int(n)) for n in header.get("bytes", ())]
        if [len(a) for a in arrays] != list(header.get("bytes", ())):
            return None
        return header, arrays

    def _broken(self) -> ChartError:
        if self._late:
            return LimitError(
                f"opening it took longer than the {self._limits.seconds:g} s allowed.",
                remedy="Print the page with the chart into a new PDF or save it as PNG.",
            )
        memory = self._limits.memory_bytes / 2**30
        return LimitError(
            f"opening it took more than the {memory:g} GiB of memory allowed, or its content is "
            "damaged in a way that stopped the decoder.",
            remedy="Save the page with the chart as PNG.",
        )


def _error(error: dict[str, str]) -> ChartError:
    return ERRORS[error["kind"]](error["what"], remedy=error["remedy"])
