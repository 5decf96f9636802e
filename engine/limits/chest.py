"""Limits on what the breath does to the chest: plateau, driving pressure, power, time to exhale."""

import numpy as np

from engine.limits.row import Array, Limit, inside, middle, share_inside
from engine.limits.tried import (
    Tried,
    as_read,
    driving_pressure_draws,
    expiratory_times_s,
    not_passive,
    plateau_draws,
    power_draws,
    set_pressure_cmh2o,
    time_constants,
    trapped_draws_ml,
)

PLATEAU_CMH2O = 30.0
DRIVING_PRESSURE_CMH2O = 15.0
POWER_J_PER_MIN = 17.0
TIME_CONSTANTS = 3.0
TRAPPED_ML = 30.0  # about what three time constants leave of a breath of 600 mL


def _of_reading(tried: Tried) -> str:
    """When and at which PEEP the plateau behind a prediction was read."""
    chest = tried.mechanics
    if set_pressure_cmh2o(tried) is not None:
        return "Set pressure above PEEP, which the breath cannot pass in a passive patient."
    if chest.measured_at is None:
        return "No plateau pressure is charted in the last 24 h."
    return (
        f"From the plateau of {chest.plateau_cmh2o:g} cmH2O at {chest.measured_at:%H:%M on %Y-%m-%d} "
        f"({chest.tidal_volume_ml or 0:g} mL, PEEP {chest.set_peep_cmh2o or 0:g})."
    )


def _not_valid(tried: Tried) -> str:
    """Why driving pressure and power are not shown; empty where they are."""
    why, chest = not_passive(tried), tried.mechanics
    if not why and set_pressure_cmh2o(tried) is None and tried.peep_moves:
        then, now = (
            "unknown" if p is None else f"{p:g}" for p in (chest.set_peep_cmh2o, tried.settings.peep_cmh2o)
        )
        why = f"the plateau was read at PEEP {then}, tried is {now} cmH2O"
    return why


def plateau(tried: Tried) -> Limit:
    """30 cmH2O: predicted from compliance, with the spread that a step of volume or PEEP brings.

    While the patient triggers, a plateau beyond the limit counts as a breach, one inside cannot be judged.
    """
    draws, why = plateau_draws(tried), not_passive(tried)
    value = middle(draws)
    ok = inside(value, high=PLATEAU_CMH2O)
    says = _of_reading(tried)
    if value is not None and tried.peep_moves and set_pressure_cmh2o(tried) is None:
        says += " PEEP is tried at another value: compliance may move either way, so this is wide."
    if (tried.mechanics.peep_cmh2o or 0.0) > (tried.mechanics.set_peep_cmh2o or 0.0):
        says += " Intrinsic PEEP is carried on as it was; another rate or volume changes it."
    if value is not None and why:
        ok = False if ok is False else None
        says += f" It may read too low here: {why}."
    if (trapped_ml := _newly_trapped_ml(tried)) is not None and value is not None:
        ok = False if ok is False else None
        says += (
            f" About {trapped_ml:.0f} mL would stay trapped at this faster rate: the plateau would read "
            "higher than this, by an unknown amount."
        )
    if "raised_abdominal_pressure" in tried.patient.conditions:
        says += " Abdominal pressure is raised: part of it is chest wall, not lung."
    return Limit(
        name="plateau",
        level="hard",
        value=value,
        limit=PLATEAU_CMH2O,
        unit="cmH2O",
        ok=ok,
        probability=None
        if draws is None or trapped_ml is not None
        else share_inside(as_read(tried, draws), high=PLATEAU_CMH2O),
        says=says,
        source="ARDS Network 2000 N Engl J Med 342:1301; spread: reasoned, no source",
    )


def _newly_trapped_ml(tried: Tried) -> float | None:
    """Volume trapped at a rate faster than the plateau was read at; ``None``: little, or not known."""
    then, now = tried.mechanics.rate_per_min, middle(tried.rate_per_min)
    if set_pressure_cmh2o(tried) is not None or then is None or now is None or now <= then:
        return None
    trapped = middle(trapped_draws_ml(tried, expiratory_times_s(tried), time_constants(tried).plain_s))
    return trapped if trapped is not None and trapped > TRAPPED_ML else None


def driving_pressure(tried: Tried) -> Limit:
    """15 cmH2O, in a passive patient at the measured PEEP only."""
    why = _not_valid(tried)
    draws = None if why else driving_pressure_draws(tried)
    value = middle(draws)
    return Limit(
        name="driving_pressure",
        level="soft",
        value=value,
        limit=DRIVING_PRESSURE_CMH2O,
        unit="cmH2O",
        ok=inside(value, high=DRIVING_PRESSURE_CMH2O),
        probability=None
        if draws is None
        else share_inside(as_read(tried, draws), high=DRIVING_PRESSURE_CMH2O),
        says=f"Not valid here: {why}." if why else _of_reading(tried),
        source="Amato 2015 N Engl J Med 372:747 (association); spread: reasoned, no source",
    )


def mechanical_power(tried: Tried) -> Limit:
    """Information: 17 J/min goes with higher mortality in one analysis and not in another."""
    why = _not_valid(tried)
    draws = None if why else power_draws(tried)
    value = middle(draws)
    evidence = (
        "Mortality rose above 17 J/min in 8,207 patients, an association; in 222 with ARDS raw power "
        "made no difference (Coppola 2020 Crit Care 24:246). Information, not a target."
    )
    unknown = "Peak pressure, rate or volume is not known. " if value is None and not why else ""
    return Limit(
        name="mechanical_power",
        level="soft",
        value=value,
        limit=POWER_J_PER_MIN,
        unit="J/min",
        ok=inside(value, high=POWER_J_PER_MIN),
        probability=share_inside(draws, high=POWER_J_PER_MIN),
        says=(f"Not valid here: {why}. " if why else unknown) + evidence,
        source="Serpa Neto 2018 Intensive Care Med 44:1914; equation: Gattinoni 2016 Intensive Care Med "
        "42:1567",
    )


def expiratory_time(tried: Tried) -> Limit:
    """Three cautious time constants to exhale; below that gas may stay, adding pressure and dead space.

    The figure takes two to three times resistance x compliance, since lungs empty that much slower, and most
    ventilated patients fall short of it. That alone is no breach. It is one where resistance x compliance
    itself leaves less than three time constants or traps more than 30 mL: a lower bound of what is trapped,
    whatever the slow compartments do.
    """
    left_s, constants = expiratory_times_s(tried), time_constants(tried)
    value, needed = middle(left_s), middle(TIME_CONSTANTS * constants.cautious_s)
    ok, probability, short = None, None, False
    if value is None or left_s is None or needed is None:
        says = "Time to exhale is not known: it needs the rate and the inspiratory time or I:E."
    else:
        left = np.broadcast_to(np.asarray(left_s, dtype=np.float64), constants.plain_s.shape)
        enough, traps = inside(value, low=needed), _traps(tried, left, constants.plain_s)
        ok = False if traps else True if enough else None
        short = ok is None
        probability = share_inside(left, low=TIME_CONSTANTS * constants.cautious_s)
        says = "Trapping is likely: " if traps else "Short of the cautious figure: " if short else ""
        plain, cautious = middle(left / constants.plain_s) or 0.0, value * TIME_CONSTANTS / needed
        says += (
            f"{value:.1f} s are {plain:.1f} time constants of resistance x compliance ({constants.said}), "
        )
        says += f"{cautious:.1f} cautious ones (two to three times that)."
        says += _trapped_says(tried, left, constants.cautious_s)
    return Limit(
        name="expiratory_time",
        level="soft",
        value=value,
        limit=needed,
        unit="s",
        ok=ok,
        probability=probability,
        says=says,
        source="Richard 2003 Intensive Care Med 29:1078 (emptying slower than resistance x compliance, whose "
        "one compartment is a lower bound); 30 mL: reasoned, no source; ranges: textbook (from memory)",
        short=short,
    )


def _traps(tried: Tried, left_s: Array, plain_s: Array) -> bool:
    """Whether even resistance x compliance, by their medians, leaves too little time or too much gas."""
    kept = middle(trapped_draws_ml(tried, left_s, plain_s))
    constants = middle(left_s / plain_s)
    too_few = constants is not None and constants < TIME_CONSTANTS
    return too_few or (kept is not None and kept > TRAPPED_ML)


def _trapped_says(tried: Tried, left_s: Array, constants_s: Array) -> str:
    kept = trapped_draws_ml(tried, left_s, constants_s)
    if kept is None:
        return ""
    low, mid, high = np.quantile(
        np.where(np.isfinite(kept), kept, np.inf), (0.05, 0.5, 0.95), method="nearest"
    )
    return f" One such compartment would keep back about {mid:.0f} mL ({low:.0f} to {high:.0f})."
