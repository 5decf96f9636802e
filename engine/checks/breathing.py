"""Checks of the breath: rate, volume, timing, and the end-tidal reading."""

from engine.checks.moment import Moment, at_37, breaths_per_min, tidal_volume_ml
from engine.checks.row import PRACTICE, Check, at, percent, unless
from engine.physics.mechanics import expiratory_time_s, predicted_body_weight_kg
from engine.record import Patient

_RATE_ALLOWANCE = 1.0  # breaths a minute; a breath more or less fits into any minute
_RATE_BELOW = 2.0
_ML_PER_KG = (3.0, 10.0)
_EXHALED_SHARE = 0.15
_MINUTE_VOLUME_SHARE = 0.20
_LEAST_EXPIRATION_S = 0.5
_ETCO2_ABOVE = 6.3  # mmHg: PaCO2 less end-tidal was 0.9, SD 3.6; two SD below
_BESIDE_MINUTES = 15.0


def triggering(moment: Moment) -> Check | None:
    """A total rate above the set rate: the patient breathes, and the set rate is not what counts."""
    total, rate = moment.measured("total_rate_per_min"), moment.settings.rate_per_min
    if total is None or rate is None:
        return None
    ok = total <= rate + _RATE_ALLOWANCE
    return Check(
        name="Total rate against set rate",
        value=total,
        limit=rate + _RATE_ALLOWANCE,
        ok=ok,
        says=f"Total rate {total:g}/min at {at(moment.time)}, set {rate:g}"
        + unless(
            ok,
            ": the patient triggers. A set rate below the patient's own does next to nothing, and "
            "pressures read in a breathing patient say less.",
        ),
        source=PRACTICE,
    )


def breaths_missing(moment: Moment) -> Check | None:
    """A total rate below the set rate cannot last: a slip, a leak or a disconnection."""
    total, rate = moment.measured("total_rate_per_min"), moment.settings.rate_per_min
    if total is None or rate is None or moment.settings.mode == "support":
        return None
    ok = total >= rate - _RATE_BELOW
    return Check(
        name="Total rate not below set rate",
        value=total,
        limit=rate - _RATE_BELOW,
        ok=ok,
        says=f"Total rate {total:g}/min at {at(moment.time)}, set {rate:g}"
        + unless(ok, ": fewer breaths than set. Look at the set rate in the chart, and for a disconnection."),
        source=PRACTICE,
    )


def volume_for_this_body(moment: Moment) -> Check | None:
    """Tidal volume outside 3 to 10 mL per kg of predicted body weight, at each entry that gives one."""
    given = moment.entry.settings is not None and moment.entry.settings.tidal_volume_ml is not None
    read = moment.measured("exhaled_tidal_volume_ml") is not None and moment.settings.mode != "volume"
    volume, weight_kg = tidal_volume_ml(moment), weight_for_volume_kg(moment.case.patient)
    if not (given or read) or volume is None or weight_kg is None:
        return None
    ml, whence = volume
    low, high = _ML_PER_KG
    ok = low <= ml / weight_kg <= high
    return Check(
        name="Tidal volume for this body",
        value=round(ml / weight_kg, 1),
        limit=f"{low:g} to {high:g} mL/kg",
        ok=ok,
        says=f"Tidal volume {ml:g} mL ({whence}) at {at(moment.time)}: {ml / weight_kg:.1f} mL/kg of "
        "predicted body weight" + unless(ok, ". Look at the volume, and at height and sex in the chart."),
        source=f"plausible range: {PRACTICE}; 4 to 8 mL/kg: ARDS Network 2000 N Engl J Med 342:1301",
    )


def weight_for_volume_kg(patient: Patient) -> float | None:
    """Predicted body weight, or None where sex or height is not charted."""
    if patient.sex is None or patient.height_cm is None:
        return None
    return float(predicted_body_weight_kg(patient.sex, patient.height_cm))


def exhaled_against_set(moment: Moment) -> Check | None:
    """In volume control the exhaled breath is the set one, unless it leaks or one of the two is a slip."""
    exhaled, volume = moment.measured("exhaled_tidal_volume_ml"), moment.settings.tidal_volume_ml
    if moment.settings.mode != "volume" or exhaled is None or volume is None:
        return None
    ok = abs(exhaled / volume - 1.0) <= _EXHALED_SHARE
    return Check(
        name="Exhaled against set volume",
        value=round(exhaled / volume, 2),
        limit=f"within {percent(_EXHALED_SHARE)}",
        ok=ok,
        says=f"Exhaled {exhaled:g} mL at {at(moment.time)}, set {volume:g}"
        + unless(
            ok, ": a leak, breaths of the patient's own, stacked breaths, or an old set volume in the chart."
        ),
        source=PRACTICE,
    )


def minute_volume(moment: Moment) -> Check | None:
    """Minute volume against rate times volume."""
    minute_l, breath, rate = (
        moment.measured("minute_volume_l_per_min"),
        tidal_volume_ml(moment),
        breaths_per_min(moment),
    )
    if minute_l is None or breath is None or rate is None:
        return None
    product_l = breath[0] * rate[0] / 1000
    ok = abs(minute_l / product_l - 1.0) <= _MINUTE_VOLUME_SHARE
    return Check(
        name="Minute volume against rate and volume",
        value=minute_l,
        limit=f"{product_l:.1f} L/min within {percent(_MINUTE_VOLUME_SHARE)}",
        ok=ok,
        says=f"Minute volume {minute_l:g} L/min at {at(moment.time)}; {rate[0]:g}/min ({rate[1]}) of "
        f"{breath[0]:g} mL "
        f"({breath[1]}) make {product_l:.1f}" + unless(ok, ": one of the three is old or mistyped."),
        source=PRACTICE,
    )


def inverse_ratio(moment: Moment) -> Check | None:
    """An I:E above 1 is rare; 2 is what someone types who means 1:2."""
    ratio = moment.entry.settings.ie_ratio if moment.entry.settings else None
    if ratio is None:
        return None
    ok = ratio <= 1.0
    return Check(
        name="I:E the right way round",
        value=ratio,
        limit=1.0,
        ok=ok,
        says=f"I:E {ratio:g} at {at(moment.time)}"
        + unless(
            ok, f" means an inspiration {ratio:g} times as long as the expiration: is 1:{ratio:g} meant?"
        ),
        source=PRACTICE,
    )


def room_to_exhale(moment: Moment) -> Check | None:
    """Rate and inspiratory time that leave hardly any expiration."""
    inspiratory_s, rate = moment.settings.inspiratory_time_s, breaths_per_min(moment)
    given = moment.entry.settings is not None and moment.before.differing(moment.settings)
    first = moment.number == 0
    if inspiratory_s is None or rate is None or not (given or first):
        return None
    left_s = float(expiratory_time_s(rate[0], inspiratory_s))
    ok = left_s >= _LEAST_EXPIRATION_S
    return Check(
        name="Rate and inspiratory time go together",
        value=round(left_s, 2),
        limit=_LEAST_EXPIRATION_S,
        ok=ok,
        says=f"At {at(moment.time)} {rate[0]:g}/min ({rate[1]}) and an inspiratory time of "
        f"{inspiratory_s:g} s leave "
        f"{left_s:.1f} s to exhale" + unless(ok, ": look at both."),
        source=PRACTICE,
    )


def end_tidal(moment: Moment) -> Check | None:
    """End-tidal CO2 well above arterial: two different times, a venous-looking chart, or a slip."""
    etco2 = moment.nearest("etco2_mmhg", _BESIDE_MINUTES)
    if etco2 is None or moment.gas.specimen != "arterial":
        return None
    paco2_mmhg = at_37(moment.gas).paco2_mmhg
    ok = etco2[0] - paco2_mmhg <= _ETCO2_ABOVE
    return Check(
        name="End-tidal CO2 not above arterial",
        value=etco2[0],
        limit=round(paco2_mmhg + _ETCO2_ABOVE, 1),
        ok=ok,
        says=f"End-tidal CO2 {etco2[0]:g} mmHg at {at(etco2[1])}, PaCO2 {moment.gas.paco2_mmhg:g} mmHg in "
        f"the gas of {moment.entry.gas_time:%H:%M}"
        + unless(ok, ": the other way round is usual. Look at both, and at the units."),
        source="PaCO2 less end-tidal 0.9, SD 3.6 mmHg: Hess 1992 J Clin Monit 8:111",
    )
