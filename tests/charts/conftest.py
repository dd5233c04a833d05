"""The sample charts, each read once in a test session."""

import json
from functools import cache
from pathlib import Path

import pytest
from scoring import score

from curvefit.errors import ChartError
from curvefit.pipeline import read_chart

FOLDER = Path(__file__).resolve().parents[2] / "sample_charts"


@cache
def sample(name):
    """(path, truth) of a sample chart."""
    truth = FOLDER / f"{name}.truth.json"
    path = next(p for p in FOLDER.glob(f"{name}.*") if p.suffix != ".json")
    return path, json.loads(truth.read_text(encoding="utf-8"))


@cache
def outcome(name):
    """(Reading, Score) of a sample chart; a ChartError stands in for both where it was raised."""
    path, truth = sample(name)
    try:
        reading = read_chart(path, page=truth["page"] if truth["page"] > 1 else None)
    except ChartError as error:
        return error, error
    return reading, score(truth, reading)


@pytest.fixture(scope="session")
def read_sample():
    """A function of a sample's name that gives its (Reading, Score)."""

    def read(name):
        reading, got = outcome(name)
        if isinstance(reading, ChartError):
            pytest.fail(f"{name}: {reading}")
        return reading, got

    return read


@pytest.fixture(scope="session")
def sample_path():
    """A function of a sample's name that gives (path, truth)."""
    return sample
