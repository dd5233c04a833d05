"""What happens to a drawn page before it reaches a reader; every damage knows where pixels went.

A damage takes a clean picture and gives a damaged one and a function from clean pixels to
damaged pixels (both with the centre of the top-left pixel at (0, 0)).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Picture = NDArray[np.uint8]
Where = Callable[[Array], Array]
KINDS = ("clean", "scan", "fax", "photo", "curl", "copy", "tinted", "turned", "coarse", "through")


def damage(picture: Picture, kind: str, rng: np.random.Generator, fine: int = 1
           ) -> tuple[Picture, Where]:  # fmt: skip
    """(damaged picture, where each clean pixel went); the picture is `fine` times finer."""
    if kind not in KINDS:
        raise ValueError(f"damage {kind!r} is not one of {', '.join(KINDS)}")
    small = 1.0 / fine
    if kind in ("clean", "tinted", "coarse"):
        out, where = _warp(picture, np.eye(3), fine)
        if kind == "tinted":
            out = _tint(out, rng)
        return out, where
    if kind == "turned":
        out, where = _warp(picture, np.eye(3), fine)
        high = out.shape[0]
        turned = np.ascontiguousarray(np.rot90(_noise(out, rng, 2.0), 3))  # clockwise
        return turned, lambda xy: np.c_[high - 1 - where(xy)[:, 1], where(xy)[:, 0]]
    height, width = picture.shape[0] * small, picture.shape[1] * small
    if kind == "photo":
        matrix = _perspective(width, height, rng)
    else:
        matrix = _skew(width, height, np.radians(rng.uniform(-1.6, 1.6)))
    bow = float(rng.uniform(5, 9)) * width / 1200 if kind == "curl" else 0.0
    out, where = _warp(picture, matrix, fine, bow)
    if kind == "fax":
        return _fax(out, rng), where
    if kind == "photo":
        return _noise(_light(_blur(out, 0.9), rng, 0.35), rng, 4.0), where
    if kind == "copy":
        return _streaks(out, rng), where
    if kind == "through":
        out = _through(out)
    return _noise(_paper(_blur(out, float(rng.uniform(0.6, 1.0))), rng), rng, 3.0), where


def _skew(width: float, height: float, angle: float) -> Array:
    c, s = np.cos(angle), np.sin(angle)
    cx, cy = width / 2, height / 2
    return np.array([[c, s, cx - c * cx - s * cy], [-s, c, cy + s * cx - c * cy], [0, 0, 1.0]])


def _perspective(width: float, height: float, rng: np.random.Generator) -> Array:
    from curvefit.geometry import homography

    corners = np.array([[0, 0], [width, 0], [width, height], [0, height]], float)
    inward = rng.uniform(0.015, 0.07, (4, 2)) * [width, height]
    signs = np.array([[1, 1], [-1, 1], [-1, -1], [1, -1]])
    return homography(corners, corners + inward * signs)


def _warp(picture: Picture, matrix: Array, fine: int, bow: float = 0.0) -> tuple[Picture, Where]:
    """Bow lines by a half sine of height `bow`, map by `matrix` and take every `fine`-th pixel.

    In pixels of the result: p' = matrix · (p + bow·sin(π x / width) ĵ).
    """
    import cv2

    width, height = picture.shape[1] // fine, picture.shape[0] // fine

    def where(xy: Array) -> Array:
        from curvefit.geometry import project

        p = (np.asarray(xy, float) + 0.5) / fine - 0.5
        p = np.c_[p[:, 0], p[:, 1] + bow * np.sin(np.pi * p[:, 0] / width)]
        return project(matrix, p)

    if np.allclose(matrix, np.eye(3)) and bow == 0.0:
        small = cv2.resize(picture, (width, height), interpolation=cv2.INTER_AREA)
        return small, where
    if fine > 1:
        picture = cv2.GaussianBlur(picture, (0, 0), 0.38 * fine)
    u, v = np.meshgrid(np.arange(width, dtype=float), np.arange(height, dtype=float))
    back = np.linalg.inv(matrix)
    w = back[2, 0] * u + back[2, 1] * v + back[2, 2]
    x = (back[0, 0] * u + back[0, 1] * v + back[0, 2]) / w
    y = (back[1, 0] * u + back[1, 1] * v + back[1, 2]) / w
    y = y - bow * np.sin(np.pi * x / width)
    maps = [((m + 0.5) * fine - 0.5).astype(np.float32) for m in (x, y)]
    out = cv2.remap(picture, *maps, cv2.INTER_LINEAR, borderValue=(255, 255, 255))
    return out, where


def _blur(picture: Picture, sigma: float) -> Picture:
    import cv2

    return np.asarray(cv2.GaussianBlur(picture, (0, 0), sigma))


def _clouds(shape: tuple[int, ...], rng: np.random.Generator, grid: int) -> Array:
    """A smooth random field, about −1 to 1."""
    import cv2

    coarse = rng.normal(0, 0.5, (grid, grid)).astype(np.float32)
    return np.asarray(cv2.resize(coarse, (shape[1], shape[0]), interpolation=cv2.INTER_CUBIC))


def _noise(picture: Picture, rng: np.random.Generator, sigma: float) -> Picture:
    noise = rng.normal(0, sigma, picture.shape[:2])[:, :, None]
    return np.clip(picture + noise, 0, 255).astype(np.uint8)


def _paper(picture: Picture, rng: np.random.Generator) -> Picture:
    """Ink that is not black on paper that is not white."""
    tone = np.array([250, 246, 235.0]) - rng.uniform(0, 12, 3)
    deep = rng.uniform(0.75, 0.92)
    shade = 1.0 + 0.02 * _clouds(picture.shape, rng, 6)[:, :, None]
    return np.clip((1 - deep * (1 - picture / 255.0)) * tone * shade, 0, 255).astype(np.uint8)


def _tint(picture: Picture, rng: np.random.Generator) -> Picture:
    tone = np.array([[244, 232, 170], [205, 226, 205], [205, 220, 238], [240, 208, 205]][
        int(rng.integers(4))], float)  # fmt: skip
    shade = 1.0 + 0.015 * _clouds(picture.shape, rng, 5)[:, :, None]
    out = (0.06 + 0.94 * picture / 255.0) * tone * shade
    return _noise(np.clip(out, 0, 255).astype(np.uint8), rng, 2.5)


def _light(picture: Picture, rng: np.random.Generator, depth: float) -> Picture:
    """A lamp to one side and a soft shadow."""
    rows, cols = np.mgrid[0 : 1 : picture.shape[0] * 1j, 0 : 1 : picture.shape[1] * 1j]
    turn = rng.uniform(0, 2 * np.pi)
    slope = 1 - depth * (
        0.5 + 0.5 * (np.cos(turn) * (cols - 0.5) + np.sin(turn) * (rows - 0.5)) * 2
    )
    field = slope * (1 + 0.05 * _clouds(picture.shape, rng, 4))
    tone = np.array([255, 250, 236.0])
    return np.clip((0.1 + 0.9 * picture / 255.0) * tone * field[:, :, None], 0, 255).astype(
        np.uint8
    )


def _fax(picture: Picture, rng: np.random.Generator) -> Picture:
    """Black and white: ragged edges, specks, and some rows of paper that slipped."""
    grey = _blur(picture, 0.6).mean(2) + rng.normal(0, 9, picture.shape[:2])
    out = np.where(grey > 150 + 8 * _clouds(picture.shape, rng, 12), 255, 0).astype(np.uint8)
    specks = rng.random(out.shape)
    out[specks < 0.0004] = 0
    out[specks > 0.9985] = 255
    return out


def _through(picture: Picture) -> Picture:
    """The back of the sheet, mirrored and pale."""
    back = _blur(np.ascontiguousarray(picture[::-1, ::-1]), 2.0)
    return np.asarray(np.minimum(picture, 255 - (255 - back) // 7), np.uint8)


def _streaks(picture: Picture, rng: np.random.Generator) -> Picture:
    """A copy of a copy: hard contrast, pale vertical streaks, a dark edge."""
    grey = _blur(picture, 1.0).mean(2)
    out = 255 / (1 + np.exp(-(grey - 175) / 16))
    for _ in range(int(rng.integers(3, 6))):
        at = int(rng.integers(0, out.shape[1]))
        wide = int(rng.integers(1, 4))
        strip = out[:, at : at + wide]
        out[:, at : at + wide] = strip + (255 - strip) * rng.uniform(0.3, 0.6)
    for _ in range(2):
        at = int(rng.integers(0, out.shape[1]))
        out[:, at : at + 1] *= rng.uniform(0.72, 0.85)
    out[:, -max(4, out.shape[1] // 150) :] *= 0.35
    specks = rng.random(out.shape)
    out[specks < 0.0002] = 40
    return _noise(np.repeat(np.clip(out, 0, 255).astype(np.uint8)[:, :, None], 3, 2), rng, 3.0)
