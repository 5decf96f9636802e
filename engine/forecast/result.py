"""What a forecast holds: draws of each quantity, never a bare number."""

from dataclasses import dataclass
from datetime import datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from engine.limits import Limit
from engine.record import Settings

Array = NDArray[np.float64]

QUANTITIES = ("ph", "paco2_mmhg", "pao2_mmhg", "sao2")
LEVELS = tuple(round(0.05 * k, 2) for k in range(1, 20))
OUTLINE_POINTS = 96


@dataclass(frozen=True, slots=True, eq=False)
class Draws:
    """Equally probable values of one quantity, (draws,)."""

    values: Array

    def quantile(self, p: float) -> float:
        """The value that a share ``p`` of the draws stays below."""
        return float(np.quantile(self.values, p))

    @property
    def median(self) -> float:
        """The value in the middle of the draws."""
        return self.quantile(0.5)

    def interval(self, share: float) -> tuple[float, float]:
        """The central interval that holds a ``share`` of the draws."""
        return self.quantile(0.5 - share / 2.0), self.quantile(0.5 + share / 2.0)

    def share_where(self, below: float | None = None, above: float | None = None) -> float:
        """The share of draws under ``below`` or over ``above``."""
        outside = np.zeros(len(self.values), dtype=bool)
        if below is not None:
            outside |= self.values < below
        if above is not None:
            outside |= self.values > above
        return float(outside.mean())

    def as_json(self) -> dict[str, float]:
        """Quantiles ``q05`` to ``q95`` in steps of 5 per cent."""
        values = np.quantile(self.values, LEVELS)
        return {f"q{round(100 * p):02d}": float(v) for p, v in zip(LEVELS, values, strict=True)}


@dataclass(frozen=True, slots=True, kw_only=True)
class Recheck:
    """When a gas is worth drawing, in minutes after the change: an early look, the settled gas, and why."""

    early_minutes: float | None
    settled_minutes: float | None
    reason: str


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Forecast:
    """What the next gas will probably read, and what the settled state will be.

    A quantity is ``None`` where it is not forecast; the reason is one of ``cautions``.
    """

    version: str
    seed: int
    label: str
    made_from: datetime
    at: datetime
    settings: Settings
    changed: dict[str, tuple[Any, Any]]
    minutes: float | None
    now: dict[str, float | None]
    next_gas: dict[str, Draws | None]
    settled: dict[str, Draws | None]
    in_target: dict[str, float | None]
    harm: dict[str, float | None]
    limits: tuple[Limit, ...]
    recheck: Recheck
    cautions: tuple[str, ...]

    def region(self, share: float) -> tuple[Array, Array] | None:
        """A closed outline in the PaO2-PaCO2 plane that holds this share of the draws of the next gas.

        An ellipse in the logarithms of both, about their medians, grown until it holds the share; ``None``
        where either is not forecast.

        Returns
        -------
        pao2_mmhg, paco2_mmhg : ndarray (points,)
        """
        o2, co2 = self.next_gas["pao2_mmhg"], self.next_gas["paco2_mmhg"]
        if o2 is None or co2 is None:
            return None
        points = np.log(np.stack([o2.values, co2.values]))
        centre = np.median(points, axis=1, keepdims=True)
        factor = np.linalg.cholesky(np.cov(_within(points - centre)))
        far = np.quantile(np.linalg.norm(np.linalg.solve(factor, points - centre), axis=0), share)
        angle = np.linspace(0.0, 2.0 * np.pi, OUTLINE_POINTS)
        outline = np.exp(centre + far * factor @ np.stack([np.cos(angle), np.sin(angle)]))
        return outline[0], outline[1]

    def as_json(self) -> dict[str, Any]:
        """The object that the terminal prints."""
        quantities = {q: _json_or_none(self.next_gas[q]) for q in QUANTITIES}
        return {
            "version": self.version,
            "seed": self.seed,
            "case": self.label,
            "from": self.made_from.isoformat(),
            "settings": self.settings.given(),
            "minutes": self.minutes,
            "now": self.now,
            **quantities,
            "settled": {q: _json_or_none(self.settled[q]) for q in QUANTITIES},
            "in_target": self.in_target,
            "harm": self.harm,
            "limits": [
                {
                    "name": row.name,
                    "level": row.level,
                    "value": row.value,
                    "limit": row.limit,
                    "ok": row.ok,
                    "probability": row.probability,
                    "says": row.says,
                    "source": row.source,
                }
                for row in self.limits
            ],
            "recheck": {
                "early_minutes": self.recheck.early_minutes,
                "settled_minutes": self.recheck.settled_minutes,
                "reason": self.recheck.reason,
            },
            "cautions": list(self.cautions),
        }


def _within(points: Array) -> Array:
    """The points without the farthest 5 % in either direction, so that a tail does not turn the ellipse."""
    reach = np.quantile(np.abs(points), 0.95, axis=1, keepdims=True)
    kept: Array = points[:, np.all(np.abs(points) <= reach, axis=0)]
    return kept


def _json_or_none(draws: Draws | None) -> dict[str, float] | None:
    return None if draws is None else draws.as_json()
