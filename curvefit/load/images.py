"""Images in the child process: an image file → raw pixels as stored, and how to show them."""

from __future__ import annotations

import warnings
from typing import Any

from curvefit.load.refusal import Refusal

__all__ = ["Images"]

FORMATS = ("PNG", "JPEG", "TIFF", "BMP", "WEBP")
ORIENTATION = 0x0112  # EXIF tag
BITS = 0x0102  # TIFF tag: bits per sample
DEEP = ("I;16", "I;16B", "I;16L", "I", "F")
READABLE = 50, 4800  # dpi outside is a default or a slip, not a resolution
Answer = tuple[dict[str, Any], list[bytes]]


class Images:
    """An image file with one page or, as TIFF, several."""

    def __init__(self, path: str, limits: dict[str, Any]) -> None:
        from PIL import Image

        warnings.simplefilter("ignore")
        Image.MAX_IMAGE_PIXELS = None  # the limits are checked here, page by page
        self.limits = limits
        try:
            self._image: Any = Image.open(path, formats=FORMATS)
            several = self._image.format == "TIFF"
            self.pages = int(self._image.n_frames) if several else 1
        except (OSError, SyntaxError, ValueError, TypeError, KeyError, EOFError) as error:
            raise _damaged(error) from error

    def page(self, number: int) -> Answer:
        """One page's pixels as stored, with mode, size, orientation and resolution."""
        image = self._image
        try:
            if self.pages > 1:
                image.seek(number - 1)
            self._check(*image.size)
            orientation = _orientation(image)
            image.load()
            turned = _orientation(image) == 1 and orientation != 1
            pixels = _plain(image)
            data = pixels.tobytes()
        except Refusal:
            raise
        except (OSError, SyntaxError, ValueError, TypeError, KeyError, EOFError) as error:
            raise _damaged(error) from error
        header = {
            "kind": "image",
            "mode": pixels.mode,
            "size": pixels.size,
            "full": _full(image),
            "orientation": orientation,
            "turned": turned,
            "dpi": _resolution(image),
        }
        return header, [data]

    def _check(self, width: int, height: int) -> None:
        most, side = self.limits["pixels"], self.limits["side"]
        if width * height > most or max(width, height) > side:
            raise Refusal(
                "limit",
                f"the image is {width} × {height} px; at most {most / 1e6:g} million pixels and "
                f"{side} px a side are read.",
                "Save it at a lower resolution (300 dpi is enough) or cut out the chart.",
            )


def _damaged(error: Exception) -> Refusal:
    why = str(error).strip().rstrip(".") or type(error).__name__
    if "cannot identify" in why:
        why = "it does not hold what its first bytes promise"
    return Refusal(
        "open",
        f"the image cannot be decoded: {why}.",
        "The file is damaged or cut short: save or send it again.",
    )


def _orientation(image: Any) -> int:
    value = image.getexif().get(ORIENTATION, 1)
    return int(value) if value in range(1, 9) else 1


def _plain(image: Any) -> Any:
    """The image in mode L, RGB or one of the deep grey modes, on white where it lets through."""
    from PIL import Image

    if image.mode in DEEP and "transparency" not in image.info:
        return image
    if image.mode in ("L", "RGB") and "transparency" not in image.info:
        return image
    if "transparency" in image.info or image.mode in ("LA", "PA", "RGBA", "La", "RGBa"):
        layered = image.convert("RGBA")
        page = Image.new("RGB", image.size, "white")
        page.paste(layered.convert("RGB"), mask=layered.getchannel("A"))
        return page
    return image.convert("L" if image.mode == "1" else "RGB")


def _full(image: Any) -> int:
    """The sample value that stands for white in a deep grey image."""
    bits = getattr(image, "tag_v2", {}).get(BITS, (16,))
    bits = bits[0] if isinstance(bits, tuple) else bits
    return 4095 if bits == 12 else 65535


def _resolution(image: Any) -> tuple[float, float] | None:
    """Dots to the inch across and down, where the file tells."""
    try:
        x, y = (float(v) for v in image.info["dpi"])
    except (KeyError, TypeError, ValueError, ZeroDivisionError):
        return None
    low, high = READABLE
    return (x, y) if low <= x <= high and low <= y <= high else None
