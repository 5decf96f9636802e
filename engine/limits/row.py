"""One limit as a row, and how draws of a forecast are held against it."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Uncertain = Array | float | None
"""Draws of a quantity, one number where it is certain, None where it is not known."""

Level = Literal["hard", "soft"]
Verdict = Literal["past", "in doubt", "short", "inside", "unknown"]
SURELY_KEPT = 0.9
"""A limit whose value is inside with less probability than this is in doubt: design decision, no source."""

_EDGE = 1e-9  # a value typed as the limit itself is inside, whatever the arithmetic left behind


@dataclass(frozen=True, slots=True, kw_only=True)
class Limit:
    """One limit and where a setting or a forecast stands to it.

    ``level``: hard ones bind what may be proposed, soft ones are shown. ``value`` is what is set or the
    median of the draws, ``limit`` one number or a range as text, in ``unit``. ``ok`` is None where it cannot
    be judged; ``probability`` is the share of draws inside where the value is uncertain. ``says`` is one or
    two plain sentences, ``source`` where the limit comes from. ``short``: the value does not reach
    a figure that carries a margin of caution, and is no breach without that margin; ``ok`` is then None.
    """

    name: str
    level: Level
    value: float | None
    limit: float | str | None
    unit: str
    ok: bool | None
    probability: float | None
    says: str
    source: str
    short: bool = False

    @property
    def verdict(self) -> Verdict:
        """How the row may be called: never "inside" on a median alone, where the draws are not sure of it."""
        if self.ok is False:
            return "past"
        if self.short:
            return "short"
        if self.probability is not None and self.probability < SURELY_KEPT:
            return "in doubt"
        return "unknown" if self.ok is None else "inside"


def middle(value: Uncertain) -> float | None:
    """The number itself, or the median of the finite draws; None where there is none."""
    if value is None:
        return None
    draws = np.atleast_1d(np.asarray(value, dtype=np.float64))
    draws = draws[np.isfinite(draws)]
    return float(np.median(draws)) if draws.size else None


def inside(value: float | None, low: float = -np.inf, high: float = np.inf) -> bool | None:
    """Whether a number lies within its ends, both included; None where it is not known."""
    return None if value is None else bool(low - _EDGE <= value <= high + _EDGE)


def share_inside(
    value: Uncertain, low: float | Array = -np.inf, high: float | Array = np.inf
) -> float | None:
    """Share of the finite draws within the ends; None for a single number or none at all."""
    if value is None or np.ndim(value) == 0:
        return None
    draws = np.asarray(value, dtype=np.float64)
    held = (draws >= low - _EDGE) & (draws <= high + _EDGE)
    finite = np.isfinite(draws)
    return float(np.mean(held[finite])) if finite.any() else None
