"""Speed of the vectorised lung: ``python tests/benchmarks/exchange.py``.

Lungs per second against a general root finder on the same equations and as many units, in one run, so that
the machine and its load cancel. The root finder is the one the tests measure accuracy with: it gets all
equations of a lung at once as arrays. With the units it needs to serve as a reference it takes longer.
"""

import runpy
import time
from collections.abc import Callable
from pathlib import Path
from statistics import median

import numpy as np

from engine.physics.exchange import REACH, UNITS, steady_state

TESTS = Path(__file__).parents[1] / "physics" / "test_exchange.py"
LUNGS, REPEATS, ONE_BY_ONE = 2000, 9, 15
GOAL = 2000.0  # times as many lungs per second


def seconds(work: Callable[[], object]) -> float:
    """Median wall time of some repeats, after one to warm up."""
    work()
    return median(_once(work) for _ in range(REPEATS))


def _once(work: Callable[[], object]) -> float:
    started = time.perf_counter()
    work()
    return time.perf_counter() - started


def main() -> None:
    """Print medians and the ratio."""
    tests = runpy.run_path(str(TESTS))
    lungs = tests["random_lungs"](LUNGS, 5)
    able = np.flatnonzero(~steady_state(**lungs).held)[:ONE_BY_ONE]

    def general(**how: float) -> float:
        return median(_once(lambda i=i: tests["general_lung"](tests["one"](lungs, i), **how)) for i in able)

    together = seconds(lambda: steady_state(**lungs))
    alike, reference = general(units=UNITS, low=REACH), general()
    each = together / LUNGS
    rows = (
        (f"vectorised lung, {UNITS} units", each, f"{LUNGS} lungs in {1e3 * together:.1f} ms"),
        (f"general root finder, {UNITS} units", alike, f"{alike / each:,.0f} x (goal {GOAL:,.0f} x)"),
        ("general root finder, 60 units", reference, f"{reference / each:,.0f} x"),
    )
    for name, took, what in rows:
        print(f"{name:32} {1e3 * took:10.4f} ms a lung   {what}")
    for units in (9, 11, 25):
        took = seconds(lambda units=units: steady_state(**lungs, units=units))
        print(f"{f'vectorised lung, {units} units':32} {1e3 * took / LUNGS:10.4f} ms a lung")


if __name__ == "__main__":
    main()
