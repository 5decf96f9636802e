"""Time of a fit and of a forecast: ``python tests/benchmarks/forecast.py [CASE]``.

What a user waits for: the fit of a gas once it is charted, then a forecast at each movement of a control.
"""

import sys
import time
from pathlib import Path
from statistics import median

from engine.fit import fit, fits_along
from engine.forecast import forecast
from engine.reading.case_file import read_case

DEMO = Path(__file__).parents[2] / "demo_patients" / "early_ards.json"
DRAWS, REPEATS = 2000, 9


def main() -> None:
    """Print medians, and each as a multiple of the forecast."""
    path = Path(sys.argv[1]) if len(sys.argv) > 1 else DEMO
    case = read_case(path)
    usual = _fit_seconds_per_gas(path)
    per_gas = _fit_seconds_per_gas(path, draws=DRAWS)
    belief = fit(case, draws=DRAWS)
    changes = [{"fio2": 0.30 + 0.05 * i} for i in range(REPEATS)]
    forecast(belief, changes[0])
    trying = median(_seconds(lambda change=change: forecast(belief, change)) for change in changes)
    print(f"{path.stem}, {len(case.usable_gases())} gases")
    print(f"fit, usual draws     {1e3 * usual:8.0f} ms a gas    {usual / trying:6.1f} x a forecast")
    print(f"fit, {DRAWS} draws      {1e3 * per_gas:8.0f} ms a gas    {per_gas / trying:6.1f} x a forecast")
    print(f"forecast, {DRAWS} draws {1e3 * trying:8.0f} ms         (median of {REPEATS} changes of FiO2)")


def _fit_seconds_per_gas(path: Path, **given: int) -> float:
    """Median over the gases of a case, each fitted on from the one before."""
    times, started = [], time.perf_counter()
    for _ in fits_along(read_case(path), **given):
        times.append(time.perf_counter() - started)
        started = time.perf_counter()
    return median(times)


def _seconds(work) -> float:
    started = time.perf_counter()
    work()
    return time.perf_counter() - started


if __name__ == "__main__":
    main()
