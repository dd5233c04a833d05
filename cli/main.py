"""The app: every command registered, and the way out with its exit code."""

from __future__ import annotations

import os
import sys

import typer
from curvefit_cli.batch import batch
from curvefit_cli.demo import demo
from curvefit_cli.duty import duty
from curvefit_cli.fit import fit
from curvefit_cli.read import read
from curvefit_cli.show import ended
from curvefit_cli.write import write

__all__ = ["app", "main"]

app = typer.Typer(
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["--help", "-h"], "max_content_width": 100},
)


@app.callback(invoke_without_command=True)
def begin(
    context: typer.Context,
    version: bool = typer.Option(False, "--version", help="Print the version."),
) -> None:
    """Turn the printed performance chart of a pump into numbers with a known error.

    Example: curvefit read chart.png
    """
    from curvefit import __version__

    if version:
        typer.echo(f"curvefit {__version__}")
        raise typer.Exit
    if context.invoked_subcommand is None:
        typer.echo(context.get_help())
        raise typer.Exit


app.command()(read)
app.command()(fit)
app.command()(duty)
app.command()(write)
app.command()(batch)
app.command()(demo)


def _one_thread() -> None:
    """Keeps linear algebra on one thread: the many small products only wait for each other.

    Must come before numpy is loaded; what the user has set is left alone.
    """
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")


def main(arguments: list[str] | None = None) -> None:
    """Runs the command line and exits with the code that its documentation promises."""
    _one_thread()
    given = sys.argv[1:] if arguments is None else arguments
    sys.exit(ended(lambda: app(args=given, standalone_mode=False), debug="--debug" in given))


if __name__ == "__main__":
    main()
