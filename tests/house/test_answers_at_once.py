"""`curvefit --help` answers at once, because nothing heavy is imported for it."""

import subprocess
import sys
import time

HEAVY = ("numpy", "cv2", "scipy", "skimage", "PIL", "matplotlib", "onnxruntime", "pypdfium2",
         "jinja2", "tqdm", "rich", "pandas")  # fmt: skip
LOADED = """
import sys
from curvefit_cli.main import main
try:
    main({arguments})
except SystemExit as end:
    code = end.code
print("LOADED", code, *sorted({{name.partition(".")[0] for name in sys.modules}}))
"""


def loaded(*arguments):
    text = LOADED.format(arguments=list(arguments))
    done = subprocess.run([sys.executable, "-c", text], capture_output=True, text=True, check=True)
    _, code, *names = done.stdout.splitlines()[-1].split()
    return int(code), set(names)


def test_help_imports_nothing_heavy():
    for arguments in ((), ("--help",), ("read", "--help"), ("--version",)):
        code, names = loaded(*arguments)
        assert code == 0
        assert names.isdisjoint(HEAVY), (arguments, sorted(names & set(HEAVY)))


def best_time(code):
    """The shortest of five runs of a program [s], since other work may run beside it."""
    best = 9.0
    for _ in range(5):
        start = time.perf_counter()
        subprocess.run([sys.executable, "-c", code], capture_output=True, check=True)
        best = min(best, time.perf_counter() - start)
    return best


def test_help_takes_little_more_than_its_parser():
    """Set against a program that loads the parser alone, as a machine's load changes seconds."""
    bare = best_time("import typer, typer.main")
    ours = best_time("from curvefit_cli.main import main; main(['--help'])")
    assert ours < 2.0 * bare + 0.05


def test_every_command_has_help_with_an_example():
    from curvefit_cli.main import app

    assert len(app.registered_commands) >= 2
    for command in app.registered_commands:
        assert "Example: curvefit" in (command.callback.__doc__ or ""), command.callback
