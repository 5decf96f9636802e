"""Checks of airway pressures: do PEEP, plateau and peak stand in the right order and fit the breath?"""

from engine.checks.moment import Moment, tidal_volume_ml
from engine.checks.row import PRACTICE, Check, at, unless
from engine.physics.mechanics import compliance_ml_per_cmh2o

_READING = 1.0  # cmH2O: pressures are read to the whole centimetre
_COMPLIANCE = (8.0, 150.0)  # mL/cmH2O: textbook ranges 25 to 90, halved twice and more
_LEAST_STEP = 0.1  # cmH2O: keeps a compliance finite
_PRESSURE_CONTROL_GAP = 4.0  # cmH2O
_RATE_ALLOWANCE = 1.0


def _peep(moment: Moment) -> float | None:
    """Total PEEP where this entry measured it, else the set one."""
    total = moment.measured("total_peep_cmh2o")
    return total if total is not None else moment.settings.peep_cmh2o


def plateau_above_peep(moment: Moment) -> Check | None:
    """A plateau at or below PEEP would mean a breath without pressure."""
    plateau, peep = moment.measured("plateau_cmh2o"), _peep(moment)
    if plateau is None or peep is None:
        return None
    ok = plateau > peep
    return Check(
        name="Plateau above PEEP",
        value=plateau,
        limit=peep,
        ok=ok,
        says=f"Plateau {plateau:g} cmH2O at {at(moment.time)}, PEEP {peep:g}"
        + unless(ok, ": a plateau charted above PEEP instead of from zero, the two swapped, or an old PEEP?"),
        source=PRACTICE,
    )


def peak_above_plateau(moment: Moment) -> Check | None:
    """The peak can equal the plateau; it cannot lie below it by more than a reading."""
    plateau, peak = moment.measured("plateau_cmh2o"), moment.measured("peak_cmh2o")
    if plateau is None or peak is None:
        return None
    ok = peak >= plateau - _READING
    return Check(
        name="Peak not below plateau",
        value=peak,
        limit=plateau - _READING,
        ok=ok,
        says=f"Peak {peak:g} cmH2O and plateau {plateau:g} cmH2O at {at(moment.time)}"
        + unless(ok, ": the two swapped, read at different times, or a patient who pulls or pushes."),
        source=PRACTICE,
    )


def peep_against_plateau(moment: Moment) -> Check | None:
    """PEEP, plateau and volume that ask for a compliance hardly any chest has."""
    plateau, peep, volume = moment.measured("plateau_cmh2o"), _peep(moment), tidal_volume_ml(moment)
    if plateau is None or peep is None or volume is None or plateau <= peep:
        return None
    compliance, (low, high) = (
        float(compliance_ml_per_cmh2o(volume[0], max(plateau, peep + _LEAST_STEP), peep)),
        _COMPLIANCE,
    )
    ok = low <= compliance <= high
    return Check(
        name="PEEP and plateau fit the volume",
        value=round(compliance, 1),
        limit=f"{low:g} to {high:g} mL/cmH2O",
        ok=ok,
        says=f"Compliance {compliance:.0f} mL/cmH2O at {at(moment.time)}, from {volume[0]:g} mL "
        f"({volume[1]}) between PEEP {peep:g} and plateau {plateau:g} cmH2O"
        + unless(ok, ": hardly ever seen. Look at PEEP, plateau and volume."),
        source="25 to 90 mL/cmH2O in ventilated adults: textbook (from memory), doubled and halved and more",
    )


def total_peep(moment: Moment) -> Check | None:
    """Total PEEP includes the set PEEP, so it cannot lie below it."""
    total, peep = moment.measured("total_peep_cmh2o"), moment.settings.peep_cmh2o
    if total is None or peep is None:
        return None
    ok = total >= peep - _READING
    return Check(
        name="Total PEEP not below set PEEP",
        value=total,
        limit=peep - _READING,
        ok=ok,
        says=f"Total PEEP {total:g} cmH2O at {at(moment.time)}, set {peep:g}"
        + unless(ok, ": is the number the intrinsic part alone, or the set PEEP an old one?"),
        source=PRACTICE,
    )


def mean_pressure(moment: Moment) -> Check | None:
    """Mean airway pressure lies between PEEP and peak."""
    mean, peak, peep = (
        moment.measured("mean_airway_cmh2o"),
        moment.measured("peak_cmh2o"),
        moment.settings.peep_cmh2o,
    )
    if mean is None or peep is None:
        return None
    ok = peep - _READING <= mean and (peak is None or mean <= peak)
    return Check(
        name="Mean airway pressure in its place",
        value=mean,
        limit=f"{peep:g} to {peak:g} cmH2O" if peak is not None else f"{peep:g} cmH2O and more",
        ok=ok,
        says=f"Mean airway pressure {mean:g} cmH2O at {at(moment.time)}, PEEP {peep:g}"
        + (f", peak {peak:g}" if peak is not None else "")
        + unless(ok, ": it belongs between the two."),
        source=PRACTICE,
    )


def pressure_above_peep(moment: Moment) -> Check | None:
    """Pressure control: the set pressure is charted above PEEP; from zero is the slip to catch."""
    set_above = moment.settings.inspiratory_pressure_cmh2o
    peep, peak = moment.settings.peep_cmh2o, moment.measured("peak_cmh2o")
    if moment.settings.mode != "pressure" or set_above is None or peep is None or peak is None:
        return None
    ok = abs(peak - peep - set_above) <= _PRESSURE_CONTROL_GAP
    from_zero = not ok and abs(peak - set_above) <= _PRESSURE_CONTROL_GAP
    return Check(
        name="Set pressure counted above PEEP",
        value=peak,
        limit=f"{peep + set_above:g} cmH2O within {_PRESSURE_CONTROL_GAP:g}",
        ok=ok,
        says=f"Pressure control {set_above:g} above PEEP {peep:g} cmH2O, peak {peak:g} at {at(moment.time)}"
        + unless(
            ok, f": is {set_above:g} counted from zero?" if from_zero else ": the three do not fit together."
        ),
        source=PRACTICE,
    )


def plateau_of_passive_patient(moment: Moment) -> Check | None:
    """A plateau, and all that is worked out from it, holds only while the patient does not breathe."""
    plateau, total = moment.measured("plateau_cmh2o"), moment.latest("total_rate_per_min")
    rate, mode = moment.settings.rate_per_min, moment.settings.mode
    if plateau is None:
        return None
    if mode in ("support", "other"):
        ok: bool | None = False
        why = f"read in a mode ({mode}) in which the patient breathes"
    elif total is None or rate is None:
        ok, why = None, "no total rate beside it, so whether the patient was passive cannot be told"
    else:
        ok = total[0] <= rate + _RATE_ALLOWANCE
        why = f"total rate {total[0]:g}/min at {total[1]:%H:%M}, set {rate:g}" + (
            "" if ok else ", so the patient triggers"
        )
    return Check(
        name="Plateau of a passive patient",
        value=plateau,
        limit="total rate not above set rate",
        ok=ok,
        says=f"Plateau {plateau:g} cmH2O at {at(moment.time)}: {why}."
        + ("" if ok else " Driving pressure and compliance are not valid here."),
        source=f"static compliance needs a passive patient and an end-inspiratory pause: {PRACTICE}",
    )
