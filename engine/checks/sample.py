"""Checks of a gas as a sample: was it drawn, timed and charted as the forecast takes it?"""

from datetime import timedelta

from engine.checks.moment import SETTING_WORDS, Moment, at_37
from engine.checks.row import PRACTICE, Check, at, percent
from engine.physics.oxygen import so2_in_blood

_LATE_CHARTING_HOURS = 6.0
_SETTLING_MINUTES = 20.0
_VENOUS_PAO2 = 50.0  # mmHg
_OXIMETER_TWICE = 0.08  # twice the 4 % asked of oximeters
_BESIDE_MINUTES = 15.0


def used(moment: Moment) -> Check | None:
    """A gas that the forecast leaves out, and why."""
    gas = moment.gas
    if gas.specimen != "arterial":
        why = f"it is {gas.specimen}"
    elif gas.excluded:
        why = f"it was excluded ({gas.excluded})"
    elif not moment.usable:
        why = "extracorporeal support was running"
    else:
        why = ""
    return Check(
        name="Gas can be used",
        value=gas.specimen,
        limit="arterial, not excluded, no extracorporeal support",
        ok=not why,
        says=f"Gas of {at(moment.entry.gas_time)}: "
        + (f"not used, since {why}." if why else "arterial, used."),
        source=PRACTICE,
    )


def sample_time(moment: Moment) -> Check | None:
    """Drawn before it was charted, not long before, and under the settings it is charted with."""
    drawn, charted = moment.gas.drawn_at, moment.time
    if drawn is None:
        return None
    between = [m.time for m in _changes(moment) if drawn < m.time <= charted]
    if drawn > charted:
        doubt = "after it was charted; look at both times"
    elif between:
        doubt = (
            f"before the change of {at(between[-1])}: the settings shown beside it were not those of the "
            "sample"
        )
    elif charted - drawn > timedelta(hours=_LATE_CHARTING_HOURS):
        doubt = f"more than {_LATE_CHARTING_HOURS:g} h before it was charted; look at both times"
    else:
        doubt = ""
    return Check(
        name="Sample time",
        value=round((charted - drawn).total_seconds() / 60),
        limit=f"0 to {60 * _LATE_CHARTING_HOURS:g} min, no change between",
        ok=not doubt,
        says=f"The gas charted at {at(charted)} was drawn at {at(drawn)}" + (f", {doubt}." if doubt else "."),
        source=PRACTICE,
    )


def temperature_corrected(moment: Moment) -> Check | None:
    """Tensions printed for the patient's temperature read differently from all others."""
    gas = moment.gas
    if not gas.temperature_corrected:
        return None
    ph, paco2_mmhg, pao2_mmhg = at_37(gas)
    return Check(
        name="Tensions at 37 C",
        value=gas.temperature_c,
        limit=37.0,
        ok=False,
        says=f"The gas of {at(moment.entry.gas_time)} is printed for {gas.temperature_c:g} C. At 37 C it "
        f"reads pH {ph:.2f}, PaCO2 {paco2_mmhg:.0f} mmHg, PaO2 {pao2_mmhg:.0f} mmHg: compare it with "
        "other gases so.",
        source="PO2: Severinghaus 1979 J Appl Physiol 46:599, eq. 3; PCO2: Bradley 1956 J Appl Physiol "
        "9:201; pH: Rosenthal 1948 J Biol Chem 173:25 (from memory)",
    )


def settled(moment: Moment) -> Check | None:
    """Drawn within 20 minutes of a dated change, a gas shows the old state as much as the new one."""
    drawn = moment.entry.gas_time
    made = [m for m in _changes(moment) if m.time <= drawn]
    if not made:
        return None
    names = ", ".join(SETTING_WORDS[n] for n in made[-1].before.differing(made[-1].settings))
    undated = made[-1].number == moment.number
    minutes = (drawn - made[-1].time).total_seconds() / 60
    if undated:
        says = (
            f"The gas of {at(drawn)} came with a change ({names}) whose moment is not charted: it may not "
            "be settled."
        )
    elif minutes < _SETTLING_MINUTES:
        says = (
            f"The gas of {at(drawn)} was drawn {minutes:.0f} min after a change ({names}): unsettled, "
            "since PaO2 needs 5 to 20 min and PaCO2 about an hour."
        )
    else:
        says = f"The gas of {at(drawn)} was drawn {minutes:.0f} min after the last change ({names})."
    return Check(
        name="Minutes since a change",
        value=None if undated else round(minutes),
        limit=_SETTLING_MINUTES,
        ok=None if undated else minutes >= _SETTLING_MINUTES,
        says=says,
        source="CO2 stores: 41 to 62 % of the way at 10 min, 56 to 76 % at 20 (computed for this project "
        "from Farhi & Rahn 1955 J Appl Physiol 7:472); PaO2: Cakar 2001 Intensive Care Med 27:655",
    )


def not_venous(moment: Moment) -> Check | None:
    """A low PaO2 beside a good SpO2, or with a leap of PaCO2, is venous blood until shown otherwise."""
    if not moment.usable:
        return None
    gas, (ph, paco2_mmhg, pao2_mmhg) = moment.gas, at_37(moment.gas)
    so2, spo2 = float(so2_in_blood(pao2_mmhg, ph, paco2_mmhg)), moment.nearest("spo2", _BESIDE_MINUTES)
    says = f"Gas of {at(moment.entry.gas_time)}: PaO2 {gas.pao2_mmhg:g} mmHg"
    ok: bool | None = True
    if pao2_mmhg > _VENOUS_PAO2:
        says += ", above what mixed venous blood holds."
    elif spo2 is None:
        ok = None
        says += (
            f" (saturation about {percent(so2)}), PaCO2 {gas.paco2_mmhg:g}: may be venous; no SpO2 beside "
            "it to tell."
        )
    elif spo2[0] - so2 > _OXIMETER_TWICE:
        ok = False
        says += (
            f" means a saturation of about {percent(so2)}, while SpO2 read {percent(spo2[0])} at "
            f"{spo2[1]:%H:%M}: it may be venous or mixed blood (PaCO2 {gas.paco2_mmhg:g} mmHg then too "
            "high as well). Look at the sample."
        )
    else:
        says += (
            f" is low, and SpO2 {percent(spo2[0])} at {spo2[1]:%H:%M} agrees: arterial, as far as can be "
            "told."
        )
    return Check(
        name="Arterial, not venous",
        value=gas.pao2_mmhg,
        limit=f"PaO2 above {_VENOUS_PAO2:g} mmHg, or SpO2 within 8 % of it",
        ok=ok,
        says=says,
        source=f"mixed venous blood near 40 mmHg and 75 %: {PRACTICE}; SpO2 within 4 %: ISO 80601-2-61 "
        "(from memory)",
    )


def _changes(moment: Moment) -> list[Moment]:
    """The entries up to this one in which a setting took another value."""
    earlier = (Moment(case=moment.case, number=n, stood=moment.stood) for n in range(moment.number + 1))
    return [m for m in earlier if m.before.differing(m.settings)]
