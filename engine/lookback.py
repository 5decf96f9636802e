"""Cases -> forecasts beside what was measured: how far these forecasts could be trusted.

For every usable gas with an earlier one in its case: the forecast of that gas at its own time, as it stood
when the last change between the two was made, from all entries strictly before that moment, and that change.
Without a change: from all entries up to the earlier gas. A change in the gas's own entry counts as made just
before it and settled, and no measured value of that entry is used. Nothing is refused here: where a screen
would not forecast, the interval is wide.
"""

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from datetime import timedelta
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from engine.fit import Fit, NothingToSay, fits_along
from engine.fit.sequence import settings_at, up_to
from engine.forecast import LEVELS, predict
from engine.reading.case_file import BadCase, read_case, text_from_time
from engine.record import Case, Entry

Array = NDArray[np.float64]

SCORED = ("paco2_mmhg", "pao2_mmhg", "ph")
LOOKBACK_DRAWS = 2000  # twice those of a screen: scores should not hang on the seed


@dataclass(frozen=True, slots=True)
class Lookback:
    """Rows in the order case, time, made_at, quantity, measured, q05 .. q95; what was left out, and why."""

    rows: tuple[dict[str, Any], ...]
    left_out: tuple[tuple[str, str], ...]


def lookback(
    paths: Sequence[Path],
    *,
    read_as: str,
    seed: int,
    workers: int,
    on_done: Callable[[int, int], None] | None = None,
) -> Lookback:
    """Replay every case; one that cannot be used never stops the rest.

    Parameters
    ----------
    paths : sequence of Path
        Case files.
    read_as : str
        ``seen`` or ``done``: governs the whole replay.
    seed : int
    workers : int
        Processes; 1 works in this one.
    on_done : callable, optional
        Told how many cases of how many are done.
    """
    found: dict[Path, tuple[list[dict[str, Any]], str | None]] = {}
    if workers <= 1:
        for path in paths:
            found[path] = _replayed(path, read_as, seed)
            if on_done:
                on_done(len(found), len(paths))
    else:
        with ProcessPoolExecutor(workers) as pool:
            waiting = {pool.submit(_replayed, path, read_as, seed): path for path in paths}
            for done in as_completed(waiting):
                found[waiting[done]] = done.result()
                if on_done:
                    on_done(len(found), len(paths))
    rows = tuple(row for path in paths for row in found[path][0])
    left_out = tuple((path.stem, reason) for path in paths if (reason := found[path][1]) is not None)
    return Lookback(rows, left_out)


def _replayed(path: Path, read_as: str, seed: int) -> tuple[list[dict[str, Any]], str | None]:
    """The rows of one file, as far as they go, and why they go no further."""
    rows: list[dict[str, Any]] = []
    try:
        for row in rows_of(read_case(path), path.stem, read_as=read_as, seed=seed):
            rows.append(row)
    except (BadCase, NothingToSay, OSError) as reason:
        return rows, str(reason)
    except Exception as fault:  # whatever befalls one case is named and must not stop the rest
        return rows, f"a fault of the program: {type(fault).__name__}: {fault}"
    return rows, None if rows else "fewer than two usable gases"


def rows_of(case: Case, name: str, *, read_as: str, seed: int) -> Iterator[dict[str, Any]]:
    """The rows of one case."""
    numbers = case.usable_gases()
    fits = fits_along(case, seed=seed, draws=LOOKBACK_DRAWS, read_as=read_as)
    for number, fit in zip(numbers[1:], fits, strict=False):  # in this order the last gas is not fitted
        yield from _rows_of_gas(case, name, fit, number, seed)


def _rows_of_gas(case: Case, name: str, fit: Fit, number: int, seed: int) -> Iterator[dict[str, Any]]:
    entry, gas = case.entries[number], case.entries[number].gas
    assert gas is not None  # a usable gas
    change = last_change(case, fit.gas_number, number)
    known = case.before(fit.gas_number + 1 if change is None else change)
    tried, minutes = _tried(case, change, number)
    p = predict(
        up_to(fit, known),
        tried,
        hours=max((entry.gas_time - fit.gas_time) / timedelta(hours=1), 0.0),
        minutes=minutes,
        effort_stops=False,
        seed=seed,
    )
    for quantity in SCORED:
        draws = getattr(p.sample, quantity)
        quantiles = np.quantile(draws[np.isfinite(draws)], LEVELS)
        yield {
            "case": name,
            "time": text_from_time(entry.time),
            "made_at": text_from_time(case.entries[fit.gas_number if change is None else change].time),
            "quantity": quantity,
            "measured": getattr(gas, quantity),
            **{f"q{round(100 * p):02d}": float(v) for p, v in zip(LEVELS, quantiles, strict=True)},
        }


def last_change(case: Case, earlier: int, number: int) -> int | None:
    """The entry of the last change after the earlier gas's entry, the gas's own included; ``None``: none."""
    for change in range(number, earlier, -1):
        if settings_at(case, change - 1).differing(settings_at(case, change)):
            return change
    return None


def _tried(case: Case, change: int | None, number: int) -> tuple[Entry, float | None]:
    """The change as it was made, without any measured value, and the minutes from it to the gas."""
    if change is None:
        return Entry(time=case.entries[number].time), None
    made = case.entries[change]
    tried = Entry(
        time=made.time, settings=made.settings, change_reason=made.change_reason, events=made.events
    )
    if change == number:
        return tried, None
    return tried, max((case.entries[number].gas_time - made.time) / timedelta(minutes=1), 0.0)
