"""A whole read opens no network connection, in no process that it starts."""

import os
from pathlib import Path

from command import curvefit

FOLDER = Path(__file__).resolve().parents[2] / "sample_charts"

# imported by every Python process that sees it on its path, before anything else runs
WATCH = """
import os, sys

def _watch(event, arguments, log=os.environ["SOCKET_LOG"]):
    if event in ("socket.connect", "socket.bind", "socket.sendto", "socket.getaddrinfo",
                 "socket.gethostbyname"):
        address = arguments[-1] if event in ("socket.connect", "socket.bind") else arguments
        if isinstance(address, (str, bytes)):
            return  # a local pipe between the reader's own processes
        with open(log, "a") as out:
            out.write(f"{event} {arguments}\\n")
        raise PermissionError("the network is closed")

sys.addaudithook(_watch)
with open(os.environ["SOCKET_LOG"], "a") as out:
    out.write(f"watching {os.getpid()}\\n")
"""


def _read(chart, tmp_path):
    watch = tmp_path / "watch"
    watch.mkdir()
    (watch / "sitecustomize.py").write_text(WATCH)
    log = tmp_path / "log"
    log.touch()
    env = os.environ | {"PYTHONPATH": str(watch), "SOCKET_LOG": str(log)}
    return curvefit("read", FOLDER / chart, "--out", tmp_path / "out", env=env), log.read_text()


def test_a_full_read_with_its_character_reader_connects_to_nothing(tmp_path):
    ran, log = _read("single-head.png", tmp_path)
    assert ran.code == 0, ran.err
    lines = log.splitlines()
    assert len(lines) >= 2, "the watch ran"
    assert all(line.startswith("watching") for line in lines), log


def test_the_watch_would_see_a_connection(tmp_path):
    """The watch itself: a process that tries is stopped and written down."""
    import subprocess
    import sys

    watch = tmp_path / "sitecustomize.py"
    watch.write_text(WATCH)
    log = tmp_path / "log"
    env = os.environ | {"PYTHONPATH": str(tmp_path), "SOCKET_LOG": str(log)}
    code = "import socket; socket.create_connection(('127.0.0.1', 9))"
    done = subprocess.run([sys.executable, "-c", code], env=env, capture_output=True, check=False)
    assert done.returncode != 0
    assert "socket" in log.read_text()
