"""Runs the command line in a process of its own and says what it cost."""

from __future__ import annotations

import json
import subprocess
import sys
import time
from dataclasses import dataclass
from pathlib import Path

# A small process between this one and the command, so that the peak is the command's own: a
# process started from here would inherit the size of the whole test session.
BETWEEN = """
import json, resource, subprocess, sys
done = subprocess.run(sys.argv[2:], capture_output=True, timeout=float(sys.argv[1]))
peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
text = [s.decode("utf-8", "replace") for s in (done.stdout, done.stderr)]
print(json.dumps([done.returncode, *text, peak]))
"""
MAIN = "from curvefit_cli.main import main; main()"


@dataclass(frozen=True)
class Ran:
    """What a command said; peak [MiB] of its largest process, children too; seconds."""

    code: int
    out: str
    err: str
    peak: float
    seconds: float


def curvefit(
    *arguments: object,
    cwd: Path | None = None,
    limit: float = 120.0,
    env: dict[str, str] | None = None,
) -> Ran:
    """Run `curvefit …` and say how it went."""
    command = [sys.executable, "-c", MAIN, *map(str, arguments)]
    start = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-c", BETWEEN, str(limit), *command],
        cwd=cwd, env=env, capture_output=True, text=True, timeout=limit + 30, check=True,
    )  # fmt: skip
    code, out, err, peak = json.loads(done.stdout)
    return Ran(code, out, err, peak, time.perf_counter() - start)
