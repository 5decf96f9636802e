"""Checks of FiO2: can it have given this PaO2, and was it charted when it was turned?"""

from engine.checks.haemoglobin import COHB_LIMIT
from engine.checks.moment import Moment, at_37, station_pressure_mmhg
from engine.checks.row import PRACTICE, Check, at, percent, unless
from engine.physics.air import palvo2_mmhg
from engine.record import Entry, Measured

_PAO2_SCATTER = 0.10  # twice the CV of PaO2 within a stable patient
_FULL, _AIR = 1.0, 0.21
_FULL_STANDS_MINUTES, _AIR_STANDS_MINUTES = 60.0, 15.0
_FULL_DOUBTED_FROM, _AIR_DOUBTED_BELOW = 0.98, 0.90
_STEP_FROM_UP_TO, _GOOD_SPO2 = 0.6, 0.94
_PROCEDURES = frozenset(
    ("suction", "bronchoscopy", "transport", "reintubation", "disconnection", "recruitment")
)


def below_alveolar(moment: Moment) -> Check | None:
    """No blood holds more oxygen than the alveoli at the charted FiO2 can give."""
    fio2 = moment.settings.fio2
    if fio2 is None:
        return None
    gas, (_, paco2_mmhg, pao2_mmhg) = moment.gas, at_37(moment.gas)
    barometric_mmhg, _ = station_pressure_mmhg(moment.case.site)
    highest = (1 + _PAO2_SCATTER) * float(palvo2_mmhg(fio2, barometric_mmhg, paco2_mmhg))
    ok = pao2_mmhg <= highest
    return Check(
        name="PaO2 within reach of FiO2",
        value=gas.pao2_mmhg,
        limit=round(highest),
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: PaO2 {gas.pao2_mmhg:g} mmHg at FiO2 {fio2:g}"
        + unless(
            ok,
            f", more than alveoli can hold ({highest:.0f} mmHg with scatter). Look at the FiO2 of that "
            "moment, an air bubble in the sample, the barometric pressure.",
        ),
        source="Fenn 1946 Am J Physiol 146:637; scatter of PaO2: Thorson 1983 Chest 84:14",
    )


def fio2_standing(moment: Moment) -> Check | None:
    """FiO2 1.0 or 0.21 left standing in the chart beside a saturation at which someone would have turned it.

    Judged at the last saturation before FiO2 changes or the chart ends, one row a stretch. Pure oxygen for
    carbon monoxide is meant, whatever SpO2 says.
    """
    fio2, saturation = moment.settings.fio2, _saturation(moment.entry)
    if fio2 not in (_FULL, _AIR) or saturation is None:
        return None
    for number in range(moment.number + 1, len(moment.case.entries)):
        if moment.stood[number].fio2 != fio2:
            break
        if _saturation(moment.case.entries[number]) is not None:
            return None
    minutes = (moment.time - moment.since("fio2")).total_seconds() / 60
    if fio2 == _FULL:
        fits = saturation < _FULL_DOUBTED_FROM or _poisoned(moment)
        ok = minutes < _FULL_STANDS_MINUTES or fits
        doubt = "was it lowered and not charted?"
    else:
        ok = minutes < _AIR_STANDS_MINUTES or saturation >= _AIR_DOUBTED_BELOW
        doubt = "was it raised and not charted?"
    return Check(
        name="FiO2 left standing",
        value=fio2,
        limit="a saturation that fits",
        ok=ok,
        says=f"FiO2 {fio2:g} stands since {at(moment.since('fio2'))}; saturation {percent(saturation)} "
        f"at {at(moment.time)}" + unless(ok, f": {doubt} Look at the ventilator."),
        source=PRACTICE,
    )


def fio2_stepped_to_full(moment: Moment) -> Check | None:
    """A sudden FiO2 of 1 at a good saturation: a typed "1", oxygen for a moment, or meant."""
    before, now = moment.before.fio2, moment.settings.fio2
    if now != _FULL or before is None or before > _STEP_FROM_UP_TO:
        return None
    spo2 = moment.latest("spo2", hours=0.5)
    procedure = moment.entry.change_reason == "procedure" or bool(_PROCEDURES & set(moment.entry.events))
    explained = procedure or (spo2 is not None and spo2[0] < _GOOD_SPO2)
    beside = f" at SpO2 {percent(spo2[0])}" if spo2 else ""
    return Check(
        name="FiO2 of 1 meant",
        value=now,
        limit="a reason, or a saturation below 94 %",
        ok=True if explained else None,
        says=f"FiO2 from {before:g} to 1 at {at(moment.time)}{beside}"
        + unless(explained, ": is 100 % meant, not 1 % above something, 10 %, or oxygen for a moment?"),
        source=PRACTICE,
    )


def _poisoned(moment: Moment) -> bool:
    """Whether a gas of the stay up to here showed carbon monoxide."""
    gases = [e.gas for e in moment.case.entries[: moment.number + 1] if e.gas is not None]
    return any((gas.cohb or 0.0) >= COHB_LIMIT for gas in gases)


def _saturation(entry: Entry) -> float | None:
    """SpO2 of the entry, else the SaO2 of its gas."""
    spo2 = (entry.measured or Measured()).spo2
    return spo2 if spo2 is not None or entry.gas is None else entry.gas.sao2
