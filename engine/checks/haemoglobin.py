"""Checks of haemoglobin: how much of it, in which unit, and what sits on it instead of oxygen."""

from engine.checks.moment import Moment, at_37
from engine.checks.row import PRACTICE, Check, at, percent, unless
from engine.physics.oxygen import so2_in_blood
from engine.record import Entry
from engine.units import g_per_dl_from_mmol_per_l_hb

COHB_LIMIT = 0.10
"""Carboxyhaemoglobin from which an ordinary pulse oximeter is not believed."""

_OXIMETER = "Jubran 1999 Crit Care 3:R11 (review)"
_METHB_LIMIT = 0.03
_BESIDE_MINUTES = 15.0


def carboxyhaemoglobin(moment: Moment) -> Check | None:
    """From 10 % of carboxyhaemoglobin on, an ordinary pulse oximeter shows far more than there is."""
    gas = moment.gas
    if gas.cohb is None:
        return None
    ok = gas.cohb < COHB_LIMIT
    spo2 = moment.nearest("spo2", _BESIDE_MINUTES)
    reads = f" (SpO2 {percent(spo2[0])} at {spo2[1]:%H:%M})" if spo2 else ""
    return Check(
        name="Carboxyhaemoglobin",
        value=gas.cohb,
        limit=COHB_LIMIT,
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: carboxyhaemoglobin {percent(gas.cohb)}"
        + unless(
            ok,
            f". SpO2 cannot be trusted{reads}: oxyhaemoglobin is about {percent(_oxyhaemoglobin(moment))} "
            "of all haemoglobin. SpO2 is no reason for a lower FiO2 here: oxygen is what washes "
            "carbon monoxide out.",
        ),
        source=_OXIMETER + f"; limit: {PRACTICE}",
    )


def methaemoglobin(moment: Moment) -> Check | None:
    """Methaemoglobin pulls an ordinary pulse oximeter towards 85 %, whatever the saturation is."""
    gas = moment.gas
    if gas.methb is None:
        return None
    ok = gas.methb < _METHB_LIMIT
    return Check(
        name="Methaemoglobin",
        value=gas.methb,
        limit=_METHB_LIMIT,
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: methaemoglobin {percent(gas.methb)}"
        + unless(
            ok,
            ". SpO2 drifts towards 85 % and cannot be trusted; oxyhaemoglobin is about "
            f"{percent(_oxyhaemoglobin(moment))} of all haemoglobin.",
        ),
        source=_OXIMETER + f"; limit: {PRACTICE}",
    )


def haemoglobin_unit(moment: Moment) -> Check | None:
    """Values up to 11 could be mmol/L (asked at the first gas), those below 4 or above 20 no g/dL."""
    hb = moment.gas.hb_g_per_dl
    first = all(e.gas is None for e in moment.case.entries[: moment.number])
    unlikely = not 4 <= hb <= 20
    if not (first or unlikely):
        return None
    in_g_per_dl = g_per_dl_from_mmol_per_l_hb(hb)
    if unlikely:
        asks = ": hardly ever seen. Look at the unit: g/L is ten times g/dL, mmol/L is 0.62 times."
    elif hb <= 11:
        asks = (
            f". If the analyser prints mmol/L, this is {in_g_per_dl:.1f} g/dL: the number alone cannot tell."
        )
    else:
        asks = "."
    return Check(
        name="Unit of haemoglobin",
        value=hb,
        limit="11 to 20 g/dL leaves no doubt",
        ok=False if unlikely else (None if hb <= 11 else True),
        says=f"Gas of {at(moment.entry.gas_time)}: haemoglobin {hb:g} g/dL{asks}",
        source=f"1 g/dL is 0.6206 mmol/L; limits: {PRACTICE}",
    )


def haemoglobin_step(moment: Moment) -> Check | None:
    """A leap of haemoglobin between two gases without transfusion: bleeding, dilution, or another unit."""
    earlier = [(n, e) for n, e in enumerate(moment.case.entries[: moment.number]) if e.gas is not None]
    if not earlier:
        return None
    number, entry = earlier[-1]
    then, now = _hb(entry), moment.gas.hb_g_per_dl
    transfused = any("transfusion" in e.events for e in moment.case.entries[number : moment.number + 1])
    ok = transfused or 0.7 <= now / then <= 1.4
    return Check(
        name="Haemoglobin against the gas before",
        value=round(now / then, 2),
        limit="0.7 to 1.4 times, or a transfusion between",
        ok=ok,
        says=f"Haemoglobin {now:g} g/dL at {at(moment.entry.gas_time)} after {then:g} at "
        f"{at(entry.gas_time)}"
        + unless(ok, ": bleeding, dilution, a mixed-up sample, or one of the two in mmol/L or g/L."),
        source=PRACTICE,
    )


def _hb(entry: Entry) -> float:
    """Haemoglobin of an entry that has a gas."""
    return entry.gas.hb_g_per_dl if entry.gas is not None else float("nan")


def _oxyhaemoglobin(moment: Moment) -> float:
    """Share of all haemoglobin that carries oxygen: functional saturation of what is left to carry it."""
    gas, (ph, paco2_mmhg, pao2_mmhg) = moment.gas, at_37(moment.gas)
    functional = gas.sao2 if gas.sao2 is not None else float(so2_in_blood(pao2_mmhg, ph, paco2_mmhg))
    return functional * (1.0 - (gas.cohb or 0.0) - (gas.methb or 0.0))
