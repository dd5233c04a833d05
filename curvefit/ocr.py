"""Crops of printed text → (text, score), by the line recogniser that the rapidocr wheel carries.

The model (PP-OCRv6, small) is run directly by ONNX Runtime on lines that are already cut out and
upright: on the tick numbers of charts that reads more, and in less time and memory, than
searching the whole page for text. It needs no network.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from importlib import resources
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["NUMERIC", "readings", "recognise"]

#: what numbers on axes are made of
NUMERIC = "0123456789.,-−+%"

_MODEL = "PP-OCRv6_rec_small.onnx"
_HEIGHT = 48  # the model's input height [px]
_BATCH = 8
_LAST_LATIN = 0x2E80  # characters from here on are East Asian: never on the charts read here


@dataclass(frozen=True, slots=True, eq=False)
class _Recogniser:
    """session : the ONNX session. characters : per class of its output; "" for the CTC blank.

    latin : classes that may be read when no alphabet is given.
    """

    session: Any
    characters: tuple[str, ...]
    latin: NDArray[np.int64]
    name: str
    masks: dict[str, NDArray[np.int64]] = field(default_factory=dict)

    def allowed(self, alphabet: str | None) -> NDArray[np.int64]:
        """Classes of an alphabet, the blank among them."""
        if alphabet is None:
            return self.latin
        if alphabet not in self.masks:
            wanted = set(alphabet)
            classes = [i for i, c in enumerate(self.characters) if c == "" or c in wanted]
            self.masks[alphabet] = np.array(classes)
        return self.masks[alphabet]


@lru_cache(maxsize=2)
def _recogniser(threads: int) -> _Recogniser:
    import onnxruntime

    options = onnxruntime.SessionOptions()
    options.intra_op_num_threads = threads
    options.inter_op_num_threads = 1
    options.log_severity_level = 3
    options.enable_cpu_mem_arena = False  # the arena keeps the largest batch's memory for ever
    with resources.as_file(resources.files("rapidocr") / "models" / _MODEL) as path:
        session = onnxruntime.InferenceSession(
            str(path), options, providers=["CPUExecutionProvider"]
        )
    listed = session.get_modelmeta().custom_metadata_map["character"].splitlines()
    characters = ("", *listed, " ")
    latin = [i for i, c in enumerate(characters) if c == "" or ord(c[0]) < _LAST_LATIN]
    return _Recogniser(session, characters, np.array(latin), session.get_inputs()[0].name)


def recognise(
    crops: Sequence[NDArray[np.uint8]], alphabet: str | None = None, threads: int = 2
) -> list[tuple[str, float]]:
    """The text of each crop and the reader's confidence in it, in the order given.

    Parameters
    ----------
    crops : sequence of arrays of shape (height, width) or (height, width, 3), uint8 RGB
        One upright line of text each, cut out with a small margin.
    alphabet : str, optional
        The only characters that may be read; by default all but the East Asian ones.
    threads : int
        Threads of the ONNX session.

    Returns
    -------
    list of (text, score)
        score is the mean probability of the characters read, 0–1; ("", 0.0) where none was.
    """
    return [r[0] for r in readings(crops, (alphabet,), threads)]


def readings(
    crops: Sequence[NDArray[np.uint8]], alphabets: Sequence[str | None], threads: int = 2
) -> list[list[tuple[str, float]]]:
    """Per crop, its (text, score) under each of several alphabets, from one run of the model.

    Notes
    -----
    Greedy CTC decoding among the classes allowed: repeats merged, blanks dropped. The score is
    taken from the probabilities over all classes, so that a letter forced into digits scores low.
    """
    if not crops:
        return []
    reader = _recogniser(threads)
    images = [_prepared(c) for c in crops]
    order = sorted(range(len(images)), key=lambda i: images[i].shape[1])
    out: list[list[tuple[str, float]]] = [[] for _ in crops]
    for start in range(0, len(order), _BATCH):
        batch = order[start : start + _BATCH]
        width = images[batch[-1]].shape[1]
        block = np.zeros((len(batch), 3, _HEIGHT, width), np.float32)
        for k, i in enumerate(batch):
            block[k, :, :, : images[i].shape[1]] = images[i].transpose(2, 0, 1)
        probability = reader.session.run(None, {reader.name: block})[0]
        for k, i in enumerate(batch):
            out[i] = [_decode(probability[k], reader, a) for a in alphabets]
    return out


def _prepared(crop: NDArray[np.uint8]) -> NDArray[np.float32]:
    """The crop at the model's height, values −1…1.

    Small and black-and-white letters are stairs: a light blur before the cubic enlargement makes
    letters of them again.
    """
    import cv2

    image = crop if crop.ndim == 3 else np.repeat(crop[:, :, None], 3, axis=2)
    height, width = image.shape[:2]
    if height < 0.8 * _HEIGHT and _bilevel(image):
        image = cv2.GaussianBlur(image, (0, 0), 0.8)
    across = int(np.clip(round(width * _HEIGHT / max(height, 1)), 16, 2400))
    how = cv2.INTER_CUBIC if height < _HEIGHT else cv2.INTER_AREA
    image = cv2.resize(np.ascontiguousarray(image), (across, _HEIGHT), interpolation=how)
    return np.asarray(image, np.float32) / 127.5 - 1.0


def _bilevel(image: NDArray[np.uint8]) -> bool:
    grey = image[:, :, 1]
    return bool(((grey > 40) & (grey < 215)).mean() < 0.02)


def _decode(
    probability: NDArray[np.float32], reader: _Recogniser, alphabet: str | None
) -> tuple[str, float]:
    allowed = reader.allowed(alphabet)
    sub = probability[:, allowed]
    best = sub.argmax(1)
    top = sub[np.arange(len(best)), best]
    klass = allowed[best]
    first = np.r_[True, klass[1:] != klass[:-1]] & (klass != 0)
    text = "".join(reader.characters[c] for c in klass[first])
    runs = np.cumsum(np.r_[True, klass[1:] != klass[:-1]])
    scores = [float(top[(runs == r)].max()) for r in runs[first]]
    return text.strip(), float(np.mean(scores)) if scores else 0.0
