"""A change tried on one patient: what the next gas will probably read."""

from collections.abc import Mapping
from dataclasses import fields, replace
from datetime import datetime, timedelta
from typing import Any

import numpy as np
from numpy.typing import NDArray

from engine import __version__
from engine.fit import Fit
from engine.fit.observation import gas_at_37
from engine.forecast.cautions import cautions_of
from engine.forecast.predict import predict
from engine.forecast.recheck import recheck_of
from engine.forecast.refusals import refusals
from engine.forecast.result import QUANTITIES, Draws, Forecast, Recheck
from engine.limits import limits_for, mechanics_of
from engine.lung import Gas
from engine.lung.breathing import EXCHANGER_ML, last_settings
from engine.record import Entry, Impossible, Settings, Target

Array = NDArray[np.float64]

SETTLED_HOURS = 1.0  # drift counted in a settled forecast
LONGEST_WAIT = timedelta(days=30)  # after the last entry: later, a time is a slip
HARM = {"pao2_below_55": 55.0, "ph_below_7_15": 7.15, "ph_above_7_55": 7.55}  # ARDS Network; common practice


def forecast(
    fit: Fit,
    change: Mapping[str, Any],
    *,
    at: datetime | None = None,
    minutes: float | None = None,
    effort_stops: bool = False,
    seed: int = 1,
) -> Forecast:
    """The next gas after a change that is only tried; the change is news of nothing.

    Parameters
    ----------
    fit : Fit
    change : mapping
        Settings fields by name with their new values; empty: the next gas if nothing is touched.
    at : datetime, optional
        Now; by default the time of the case's last entry.
    minutes : float, optional
        From the change to the gas; by default the settled state, with an hour of drift.
    effort_stops : bool
        Breathing effort stops with the change.
    seed : int
        Same seed, same answer.

    Raises
    ------
    Impossible
        If a field is unknown or a value cannot be.
    """
    at = at or max(fit.case.entries[-1].time, fit.gas_time)
    if at < fit.gas_time:
        raise Impossible("at", at.isoformat(), f"a time not before the last gas, {fit.gas_time.isoformat()}")
    if at - fit.case.entries[-1].time > LONGEST_WAIT:
        raise Impossible("at", at.isoformat(), f"a time within {LONGEST_WAIT.days} days of the last entry")
    if minutes is not None and not 0.0 <= minutes <= 24 * 60:
        raise Impossible("minutes", minutes, "a number from 0 to 1440")
    before = last_settings(fit.case)
    asked = settings_asked(change, before)
    settings = before.then(asked)
    changed = {n: (getattr(before, n), v) for n, v in settings.given().items() if getattr(before, n) != v}
    hours = (at - fit.gas_time) / timedelta(hours=1) + (SETTLED_HOURS if minutes is None else minutes / 60.0)
    tried = Entry(time=max(at, fit.case.entries[-1].time), settings=asked, change_reason="prompted")
    p = predict(fit, tried, hours=hours, minutes=minutes, effort_stops=effort_stops, seed=seed)
    refused = refusals(fit, p, changed)
    missing = frozenset(q for refusal in refused for q in refusal.quantities)
    reasons = tuple(refusal.reason for refusal in refused)
    nothing = len(missing) == len(QUANTITIES)
    next_gas, settled = _draws(p.sample, missing), _draws(p.settled, missing)
    return Forecast(
        version=__version__,
        seed=seed,
        label=fit.case.label,
        made_from=fit.gas_time,
        at=at,
        settings=settings,
        changed=changed,
        minutes=minutes,
        now=_now(fit),
        next_gas=next_gas,
        settled=settled,
        in_target=_in_target(settled, fit.case.target),
        harm=_harm(next_gas),
        limits=limits_for(
            fit.case.patient,
            settings,
            mechanics_of(fit.case),
            ph=_values(next_gas["ph"]),
            pao2_mmhg=_values(next_gas["pao2_mmhg"]),
            paco2_mmhg=_values(next_gas["paco2_mmhg"]),
            total_rate_per_min=p.rate_per_min,
            effective_tidal_volume_ml=p.breathing.tidal_volume_ml,
            seed=seed,
        ),
        recheck=Recheck(early_minutes=None, settled_minutes=None, reason=reasons[0])
        if nothing
        else recheck_of(fit, p, tuple(changed), effort_stops=effort_stops),
        cautions=reasons
        if nothing
        else (*reasons, *cautions_of(fit, p, settings, changed, at, effort_stops=effort_stops)),
    )


def settings_asked(change: Mapping[str, Any], before: Settings) -> Settings:
    """The change as settings; a swap of humidifiers moves the exchanger's volume unless a volume is given."""
    known = {f.name for f in fields(Settings)}
    for name in change:
        if name not in known:
            raise Impossible(name, change[name], f"one of the settings {', '.join(sorted(known))}")
    asked, device_ml = Settings(**change), before.apparatus_dead_space_ml
    after = before.then(asked)
    if after.rate_per_min == 0 and after.mode != "support":
        raise Impossible("rate_per_min", after.rate_per_min, "more than 0 outside support mode")
    breath_s, inspiration_s = 60.0 / (after.rate_per_min or 1.0), after.inspiratory_time_s or 0.0
    if {"inspiratory_time_s", "rate_per_min"} & change.keys() and inspiration_s >= breath_s:
        expected = f"less than the whole breath of {breath_s:.1f} s"
        raise Impossible("inspiratory_time_s", after.inspiratory_time_s, expected)
    if asked.humidifier is None or asked.apparatus_dead_space_ml is not None or device_ml is None:
        return asked
    swap = (before.humidifier, asked.humidifier)
    if swap == ("exchanger", "heated"):
        return replace(asked, apparatus_dead_space_ml=0.0)
    if swap == ("heated", "exchanger"):
        return replace(asked, apparatus_dead_space_ml=device_ml + EXCHANGER_ML)
    return asked


def _draws(gas: Gas, refused: frozenset[str]) -> dict[str, Draws | None]:
    """Draws by quantity; lungs that have no steady state are left out of all of them alike."""
    solved = np.all([np.isfinite(getattr(gas, q)) for q in QUANTITIES], axis=0)
    return {q: None if q in refused else Draws(getattr(gas, q)[solved]) for q in QUANTITIES}


def _values(draws: Draws | None) -> Array | None:
    return None if draws is None else draws.values


def _now(fit: Fit) -> dict[str, float | None]:
    """The last usable gas at 37 C, as everything forecast is."""
    gas = fit.case.entries[fit.gas_number].gas
    assert gas is not None  # a usable gas
    ph, paco2_mmhg, pao2_mmhg = gas_at_37(gas)
    return {"ph": ph, "paco2_mmhg": paco2_mmhg, "pao2_mmhg": pao2_mmhg, "sao2": gas.sao2}


def _in_target(settled: dict[str, Draws | None], target: Target | None) -> dict[str, float | None]:
    """Probability that the settled state lies in each range, and in all of them at once."""
    inside: dict[str, NDArray[np.bool_] | None] = {}
    for q in QUANTITIES:
        low, high = target.range_of(q) if target is not None else (None, None)
        if low is None and high is None:
            continue
        draws = settled[q]
        inside[q] = None if draws is None else _between(draws.values, low, high)
    known = [i for i in inside.values() if i is not None]
    whole = float(np.all(known, axis=0).mean()) if known and len(known) == len(inside) else None
    return {
        q.removesuffix("_mmhg"): _share(inside.get(q)) for q in ("paco2_mmhg", "ph", "pao2_mmhg", "sao2")
    } | {"all": whole}


def _between(values: Array, low: float | None, high: float | None) -> NDArray[np.bool_]:
    return (values >= (-np.inf if low is None else low)) & (values <= (np.inf if high is None else high))


def _share(inside: NDArray[np.bool_] | None) -> float | None:
    return None if inside is None else float(inside.mean())


def _harm(next_gas: dict[str, Draws | None]) -> dict[str, float | None]:
    o2, ph = next_gas["pao2_mmhg"], next_gas["ph"]
    return {
        "pao2_below_55": None if o2 is None else o2.share_where(below=HARM["pao2_below_55"]),
        "ph_below_7_15": None if ph is None else ph.share_where(below=HARM["ph_below_7_15"]),
        "ph_above_7_55": None if ph is None else ph.share_where(above=HARM["ph_above_7_55"]),
    }
