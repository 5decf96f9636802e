"""Checks of the stay as a whole: who, where, which target, and what was done since the last gas."""

from engine.checks.breathing import weight_for_volume_kg
from engine.checks.moment import station_pressure_mmhg
from engine.checks.row import PRACTICE, Check, at, unless
from engine.physics.air import barometric_mmhg_from_altitude
from engine.record import Case, Entry, Target

_WEATHER_AND_WARMTH = 37.0  # mmHg: weather moves 20, warm mountains stand 17 above the standard line
_HEIGHT_CM = (140.0, 210.0)
_RESETS = ("prone", "drain", "recruitment", "reintubation")
_LIKELY: dict[str, tuple[float, float, float]] = {  # lowest, highest, narrowest
    "ph": (7.15, 7.55, 0.03),
    "paco2_mmhg": (25.0, 90.0, 4.0),
    "pao2_mmhg": (50.0, 150.0, 10.0),
    "sao2": (0.85, 1.0, 0.02),
}
_CONDITION_PACO2: dict[str, tuple[float, float]] = {
    "raised_icp": (35.0, 45.0),
    "right_heart_failure": (0.0, 48.0),
    "pregnancy": (28.0, 32.0),
}


def extracorporeal(case: Case) -> Check | None:
    """Under extracorporeal support neither shunt nor forecast means anything."""
    now = case.extracorporeal_now()
    return Check(
        name="Extracorporeal support",
        value="running" if now else "none",
        limit="none",
        ok=not now,
        says="Extracorporeal support is running: no forecast, no shunt, no trend until it has stopped "
        "and a gas was drawn."
        if now
        else "No extracorporeal support after the last entry.",
        source=PRACTICE,
    )


def station_pressure(case: Case) -> Check | None:
    """Barometric pressure measured, from the altitude, or assumed; and whether the two agree."""
    site = case.site
    pressure_mmhg, whence = station_pressure_mmhg(site)
    ok: bool | None = True
    says = f"Barometric pressure {pressure_mmhg:.0f} mmHg, {whence}."
    if site.barometric_mmhg is None and site.altitude_m is None:
        ok = None
        says = (
            "Neither barometric pressure nor altitude is charted: 760 mmHg is assumed. At altitude a "
            "healthy lung would then look shunted: at 3,500 m the thin air alone is read as shunt."
        )
    elif site.barometric_mmhg is not None and site.altitude_m is not None:
        standard = float(barometric_mmhg_from_altitude(site.altitude_m))
        ok = abs(site.barometric_mmhg - standard) <= _WEATHER_AND_WARMTH
        if not ok:
            says = (
                f"Barometric pressure {site.barometric_mmhg:g} mmHg at {site.altitude_m:g} m, where "
                f"standard air has {standard:.0f}: is it a pressure reduced to sea level, as in weather "
                "reports?"
            )
    return Check(
        name="Barometric pressure",
        value=round(pressure_mmhg),
        limit="measured at the station, or altitude known",
        ok=ok,
        says=says,
        source="US Standard Atmosphere 1976; mountains: West 1996 J Appl Physiol 81:1850",
    )


def predicted_weight(case: Case) -> Check | None:
    """Without sex and height no tidal volume can be judged."""
    patient = case.patient
    weight_kg = weight_for_volume_kg(patient)
    missing = " and ".join(n for n, v in (("sex", patient.sex), ("height", patient.height_cm)) if v is None)
    return Check(
        name="Predicted body weight",
        value=None if weight_kg is None else round(weight_kg, 1),
        limit="sex and height known",
        ok=None if weight_kg is None else True,
        says=f"Not known without {missing}: no tidal volume can be judged per kg, and forecasts are wider."
        if weight_kg is None
        else f"Predicted body weight {weight_kg:.1f} kg ({patient.sex}, {patient.height_cm:g} cm).",
        source="ARDS Network 2000 N Engl J Med 342:1301",
    )


def height(case: Case) -> Check | None:
    """A height outside the range for which predicted body weight was made."""
    height_cm, (low, high) = case.patient.height_cm, _HEIGHT_CM
    if height_cm is None:
        return None
    ok = low <= height_cm <= high
    return Check(
        name="Height",
        value=height_cm,
        limit=f"{low:g} to {high:g} cm",
        ok=ok,
        says=f"Height {height_cm:g} cm"
        + unless(ok, ": unlikely, or inches? Tidal volume per kg depends on it."),
        source=f"ARDS Network 2000 N Engl J Med 342:1301 (table from 55 inches); upper end: {PRACTICE}",
    )


def target_range(case: Case) -> Check | None:
    """A target that no one is likely to mean, or narrower than two gases of a stable patient differ."""
    if case.target is None:
        return None
    doubts = [doubt for quantity in _LIKELY for doubt in _doubts(case.target, quantity)]
    return Check(
        name="Target likely",
        value=", ".join(f"{n} {v:g}" for n, v in case.target.given().items()),
        limit=", ".join(f"{q} {low:g} to {high:g}" for q, (low, high, _) in _LIKELY.items()),
        ok=not doubts,
        says=("Target: " + "; ".join(doubts) + ". Is it meant?")
        if doubts
        else "The target range is a usual one.",
        source=f"{PRACTICE}; spread of gases: Thorson 1983 Chest 84:14",
    )


def _doubts(target: Target, quantity: str) -> list[str]:
    low, high = target.range_of(quantity)
    lowest, highest, narrowest = _LIKELY[quantity]
    doubts = [
        f"{quantity} {v:g} is unusual" for v in (low, high) if v is not None and not lowest <= v <= highest
    ]
    if low is not None and high is not None and high - low < narrowest - 1e-9:
        doubts.append(f"{quantity} {low:g} to {high:g} is narrower than gases of a stable patient differ")
    return doubts


def target_for_condition(case: Case) -> Check | None:
    """A PaCO2 target outside what the patient's condition is usually given."""
    low, high = case.target.range_of("paco2_mmhg") if case.target else (None, None)
    named = [c for c in case.patient.conditions if c in _CONDITION_PACO2]
    if not named or (low is None and high is None):
        return None
    floor = max(_CONDITION_PACO2[c][0] for c in named)
    ceiling = min(_CONDITION_PACO2[c][1] for c in named)
    ok = (low is None or low >= floor) and (high is None or high <= ceiling)
    words = ", ".join(c.replace("_", " ") for c in named)
    usual = f"{floor:g} to {ceiling:g}" if floor else f"up to {ceiling:g}"
    target = " to ".join("open" if v is None else f"{v:g}" for v in (low, high))
    return Check(
        name="Target for the condition",
        value=f"PaCO2 {target} mmHg",
        limit=f"{usual} mmHg",
        ok=ok,
        says=f"PaCO2 target {target} mmHg; with {words} {usual} mmHg is usual" + unless(ok, ". Is it meant?"),
        source=f"brain injury: Robba 2020 Intensive Care Med 46:2397 (from memory); the others: {PRACTICE}",
    )


def _last_gas(case: Case) -> Entry | None:
    numbers = case.usable_gases()
    return case.entries[numbers[-1]] if numbers else None


def gas_since(case: Case) -> Check | None:
    """Prone, drain, recruitment and reintubation make another lung, for which the last gas does not speak."""
    events = [(e.time, name) for e in case.entries for name in e.events if name in _RESETS]
    if not events:
        return None
    time, name = events[-1]
    gas = _last_gas(case)
    ok = gas is not None and gas.gas_time >= time
    return Check(
        name="A gas since the lung was changed",
        value=name,
        limit="a usable gas after it",
        ok=ok,
        says=f"{name.capitalize()} at {at(time)}"
        + (", a gas since." if ok else ", no usable gas since: the last one speaks for another lung."),
        source="P/F after such steps scatters by some 45 mmHg: Goligher 2014 AJRCCM 190:70; prone: Bell "
        "2022 J Intensive Care Med 37:883",
    )


def pneumothorax(case: Case) -> Check | None:
    """A pneumothorax in the record: drained or not, no number here can tell."""
    if "pneumothorax" not in case.patient.conditions:
        return None
    drained = [e.time for e in case.entries if "drain" in e.events]
    return Check(
        name="Pneumothorax",
        value="drain charted" if drained else "no drain charted",
        limit="drained before any pressure goes up",
        ok=True if drained else None,
        says="Pneumothorax is charted"
        + (
            f", a drain at {at(drained[-1])}."
            if drained
            else ", no drain: while it is untreated, any rise of pressure is unsafe."
        ),
        source="textbook (from memory)",
    )
