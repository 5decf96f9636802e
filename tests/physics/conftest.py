"""The published tables: one file per source key under tests/reference."""

import csv
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

REFERENCE = Path(__file__).parents[1] / "reference"

Table = dict[str, np.ndarray]


def _column(texts: tuple[str, ...]) -> np.ndarray:
    try:
        return np.array([float(text) for text in texts])
    except ValueError:
        return np.array(texts)


def read_table(name: str) -> Table:
    """Columns by name; the last line of the head names them."""
    lines = (REFERENCE / f"{name}.csv").read_text("utf-8").splitlines()
    names = [line for line in lines if line.startswith("#")][-1].lstrip("# ").split(",")
    rows = list(csv.reader(line for line in lines if not line.startswith("#")))
    return {key: _column(texts) for key, texts in zip(names, zip(*rows, strict=True), strict=True)}


@pytest.fixture
def table() -> Callable[[str], Table]:
    return read_table
