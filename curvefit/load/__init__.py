"""File → Page…: pixels, and for a vector page its strokes and words; nothing is believed yet."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from curvefit.load.limits import Limits
    from curvefit.records import Page

__all__ = ["load"]


def load(
    path: str | Path, page: int | None = None, *, limits: Limits | None = None
) -> Iterator[Page]:
    """The pages of an image or PDF file, one at a time.

    Parameters
    ----------
    path : path of a PNG, JPEG, TIFF, BMP, WebP or PDF file
    page : number of the one page wanted, from 1; None gives them all in turn.
    limits : what decoding may take; a child process that exceeds it is ended.

    Yields
    ------
    Page
        Its pixels as shown, after the turn that the file asks for.

    Raises
    ------
    OpenError
        If the file is missing, of another format, encrypted or broken.
    LimitError
        If it has more pixels, or takes more memory or time, than allowed.
    InputError
        If it has no page of that number.
    NoChart
        If it holds nothing but a picture too small for a chart.
    """
    # imported here: the child process starts through this package and needs none of it
    from curvefit.load.pages import pages_of

    return pages_of(Path(path), page, limits)
