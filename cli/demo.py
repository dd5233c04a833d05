"""curvefit demo: a bundled sample chart read end to end."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer
from curvefit_cli.options import Debug, Quiet, Strict

__all__ = ["demo"]

#: an invented pump, drawn by sample_charts/draw.py:
#: chart("stacked", 7, "inked", "scan", dpi=150, units="m3/h", language="en")
CHART = "demo_chart.jpg"


def demo(
    out: Annotated[Path, typer.Option("--out", metavar="DIR", help="Folder for all files.")] = Path(
        "curvefit-demo"
    ),
    strict: Strict = False,
    quiet: Quiet = False,
    debug: Debug = False,
) -> None:
    """Read the sample chart that comes with curvefit.

    Its pump is invented, and the chart was drawn for this purpose.

    Example: curvefit demo --out look
    """
    from importlib.resources import as_file, files

    from curvefit_cli.read import read_to
    from curvefit_cli.show import say

    with as_file(files("curvefit_cli").joinpath(CHART)) as chart:
        code = read_to(chart, out, strict=strict, quiet=quiet)
    say(f"Open {out / (Path(CHART).stem + '.report.html')} in a browser.", quiet)
    raise typer.Exit(code)
