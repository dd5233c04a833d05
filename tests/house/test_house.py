"""The house rules: what is promised in the README and the layout holds in the code."""

import ast
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
SOURCES = [p for folder in ("curvefit", "cli") for p in sorted((ROOT / folder).rglob("*.py"))]
README = (ROOT / "README.md").read_text(encoding="utf-8")
CODE = re.compile(r"[a-z]+\.[a-z0-9]+(?:-[a-z0-9]+)*")


def finding_codes() -> dict[str, set[str]]:
    """Every finding code in the sources → the files that raise it.

    A code is the second argument, or `code=`, of a call whose function makes findings.
    """
    found: dict[str, set[str]] = {}
    for path in SOURCES:
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if not isinstance(node, ast.Call):
                continue
            name = getattr(node.func, "id", getattr(node.func, "attr", ""))
            if "finding" not in name.lower() and name not in ("_say", "said", "doubt", "note"):
                continue
            arguments = [*node.args, *[k.value for k in node.keywords]]
            for value in arguments:
                for leaf in ast.walk(value):
                    text = leaf.value if isinstance(leaf, ast.Constant) else None
                    if isinstance(text, str) and CODE.fullmatch(text):
                        found.setdefault(text, set()).add(path.name)
    return found


def test_every_finding_code_is_in_the_readme_and_no_other():
    table = README.split("## Findings")[1].split("\n## ")[0]
    listed = re.findall(r"^\| `([a-z]+\.[a-z0-9-]+)`", table, re.M)
    assert len(listed) == len(set(listed))
    assert set(listed) == set(finding_codes())


def test_every_public_list_is_sorted_and_true():
    for path in SOURCES:
        tree = ast.parse(path.read_text(encoding="utf-8"))
        for node in tree.body:
            if isinstance(node, ast.Assign) and getattr(node.targets[0], "id", "") == "__all__":
                names = ast.literal_eval(node.value)
                upper = sorted(n for n in names if n.isupper())
                rest = [n for n in names if not n.isupper()]
                assert [n for n in names if n.isupper()] == upper, path
                assert rest == sorted(rest, key=lambda n: (not n[0].isupper(), n)), path


@pytest.mark.parametrize("folder", ["curvefit", "cli"])
def test_every_folder_of_code_is_packaged(folder):
    listed = tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]["packages"]
    found = {
        ".".join(p.parent.relative_to(ROOT).parts).replace("cli", "curvefit_cli", 1)
        if folder == "cli"
        else ".".join(p.parent.relative_to(ROOT).parts)
        for p in (ROOT / folder).rglob("__init__.py")
    }
    assert found <= set(listed)


def test_no_file_grows_past_a_room():
    long = {p.name: n for p in SOURCES if (n := len(p.read_text().splitlines())) > 450}
    assert not long


def test_no_heavy_import_at_module_level():
    heavy = {
        "cv2",
        "scipy",
        "skimage",
        "matplotlib",
        "onnxruntime",
        "pypdfium2",
        "PIL",
        "fluids",
        "chemicals",
        "jinja2",
        "tqdm",
    }
    for path in SOURCES:
        for node in ast.parse(path.read_text(encoding="utf-8")).body:
            names = (
                [a.name for a in node.names]
                if isinstance(node, ast.Import)
                else [node.module or ""]
                if isinstance(node, ast.ImportFrom)
                else []
            )
            assert not {n.split(".")[0] for n in names} & heavy, path


def test_help_loads_no_heavy_library():
    code = (
        "import sys\n"
        "from curvefit_cli.main import main\n"
        "try: main(['--help'])\n"
        "except SystemExit: pass\n"
        "heavy = {'cv2', 'scipy', 'numpy', 'matplotlib', 'onnxruntime', 'pypdfium2', 'PIL'}\n"
        "sys.exit(', '.join(heavy & set(sys.modules)) or 0)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr


def commands() -> list[str]:
    import typer
    from curvefit_cli.main import app

    return sorted(typer.main.get_command(app).commands)


def test_every_command_is_documented_with_an_example():
    from curvefit_cli.main import app
    from typer.testing import CliRunner

    for name in commands():
        assert f"curvefit {name}" in README, name
        shown = CliRunner().invoke(app, [name, "--help"])
        assert shown.exit_code == 0
        assert f"curvefit {name}" in shown.output.split("Example")[1], name


def test_every_option_is_documented():
    import typer
    from curvefit_cli.main import app

    for name, command in typer.main.get_command(app).commands.items():
        for parameter in command.params:
            for option in getattr(parameter, "opts", []):
                if option.startswith("--") and option != "--help":
                    assert f"`{option}" in README or f" {option}" in README, (name, option)


def test_readme_pictures_and_samples_exist():
    for target in re.findall(r"!\[[^\]]*\]\(([^)]+)\)", README):
        assert (ROOT / target).is_file(), target


def test_nothing_opens_a_connection():
    forbidden = {"socket", "http", "requests", "ssl", "ftplib", "smtplib", "asyncio"}
    for path in SOURCES:
        if "review" in path.parts:
            continue  # the correction page serves on this machine's loopback only
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            names = (
                [a.name for a in node.names]
                if isinstance(node, ast.Import)
                else [node.module or ""]
                if isinstance(node, ast.ImportFrom)
                else []
            )
            assert not {n.split(".")[0] for n in names} & forbidden, path
            assert "urllib.request" not in names, path
