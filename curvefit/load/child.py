"""The decoding child process: reads requests, limits itself, answers with raw bytes.

Run as a script by :mod:`curvefit.load.guard`. It imports the standard library and the one decoder
that the file needs, so that it starts soon and little can go wrong in it.
"""

from __future__ import annotations

import contextlib
import json
import os
import sys
from collections.abc import Sequence
from typing import Any, BinaryIO


def _limit(memory_bytes: int) -> None:
    """Bound the address space, where the system can; the caller's clock guards the time."""
    try:
        import resource
    except ImportError:
        return
    for which, most in ((resource.RLIMIT_AS, memory_bytes), (resource.RLIMIT_CORE, 0)):
        with contextlib.suppress(OSError, ValueError):  # a tighter limit of the system's own holds
            resource.setrlimit(which, (most, most))


def _answer(out: BinaryIO, header: dict[str, Any], arrays: Sequence[bytes] = ()) -> None:
    header["bytes"] = [len(a) for a in arrays]
    out.write(json.dumps(header).encode() + b"\n")
    for array in arrays:
        out.write(array)
    out.flush()


def _failure(kind: str, what: str, remedy: str) -> dict[str, Any]:
    return {"error": {"kind": kind, "what": what, "remedy": remedy}}


def main() -> None:
    """Answer requests until the input ends."""
    out = os.fdopen(os.dup(1), "wb")
    quiet = os.open(os.devnull, os.O_WRONLY)
    os.dup2(quiet, 1)  # what a decoder prints must not mix with the answers
    document: Any = None
    memory = 0
    for line in sys.stdin.buffer:
        request = json.loads(line)
        if "path" in request:
            sys.path[:] = request["search"]
            memory = request["limits"]["memory_bytes"]
            _limit(memory)
        from curvefit.load.refusal import Refusal  # found once the search path is set

        try:
            if "path" in request:
                document = _open(request)
                _answer(out, {"pages": document.pages})
            else:
                header, arrays = document.page(request["page"])
                _answer(out, header, arrays)
        except Refusal as error:
            _answer(out, _failure(*error.args))
        except MemoryError:
            what = f"opening it takes more than the {memory / 2**30:g} GiB of memory allowed."
            _answer(out, _failure("limit", what, "Save the chart at a lower resolution."))


def _open(request: dict[str, Any]) -> Any:
    if request["kind"] == "pdf":
        from curvefit.load.pdf import Document

        return Document(request["path"], request["limits"])
    from curvefit.load.images import Images

    return Images(request["path"], request["limits"])


if __name__ == "__main__":
    main()
    # no tidying up: a decoder's own may crash on what a damaged file left behind
    os._exit(0)
