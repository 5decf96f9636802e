"""What a forecast does not know and what must be read beside it, in plain sentences. Never an order."""

from datetime import datetime, timedelta

import numpy as np

from engine.checks.moment import SETTING_WORDS
from engine.fit import Fit
from engine.fit.observation import dyshaemoglobins
from engine.fit.sequence import settings_at
from engine.fit.underway import underway_at
from engine.forecast.predict import Prediction
from engine.lung.prior import logistic
from engine.physics.acid_base import ph_at_standard_base_excess
from engine.physics.oxygen import so2_in_blood
from engine.record import Settings

STALE_AFTER = timedelta(hours=8)
MUCH_SHUNT = 0.30
MUCH_COHB = 0.10
MUCH_METHB = 0.10  # common practice, no source
SPO2_AWAY = 0.04  # iso80601-2-61 (memory): accuracy asked of an oximeter
FAR_FROM_37_C = 0.5
LARGE_FIO2_STEP = 0.2 - 1e-9  # of FiO2; common practice, no source. As typed: 0.6 - 0.4 is not quite 0.2
SEVERE_BASE_DEFICIT = -10.0
ALKALAEMIA = 7.45
UNSETTLED_MINUTES = 60.0  # threestores: nine tenths of a change of PaCO2 within about an hour
WORTH_A_WORD_MMHG = 2.0
FEW_ANCESTORS = 40
RESETTING = ("prone", "drain", "recruitment", "reintubation")


def cautions_of(
    fit: Fit,
    p: Prediction,
    settings: Settings,
    changed: dict[str, tuple[object, object]],
    at: datetime,
    *,
    effort_stops: bool,
) -> tuple[str, ...]:
    """All that apply, the gravest first."""
    said = [
        *_harmful_readings(fit, p, changed),
        *_trapping(fit, p, changed),
        *_breathing(fit, p, settings, changed, effort_stops),
        *_since_then(fit, p),
        *_devices(changed),
        *_age(fit, at),
        *_identification(fit),
    ]
    return (
        *said,
        "It is assumed that nothing else has changed since the last gas: effort, secretions, circulation, "
        "position, temperature.",
    )


def _harmful_readings(fit: Fit, p: Prediction, changed: dict[str, tuple[object, object]]) -> list[str]:
    said = [*_acid_base(fit, p)]
    gas = fit.case.entries[fit.gas_number].gas
    shunt = float(np.median(logistic(p.belief.of("logit_shunt"))))
    cohb, methb = dyshaemoglobins(fit.case, fit.gas_number)
    blind = cohb >= MUCH_COHB or methb >= MUCH_METHB
    if shunt > MUCH_SHUNT:
        said.append(
            f"About {100 * shunt:.0f} % of the blood passes lung without air: FiO2 moves PaO2 little, though "
            "saturation more. The rest is for the team (PEEP, recruitment, position, secretions) and is not "
            "forecast. Lowering FiO2 still desaturates."
        )
    if gas is not None and cohb >= MUCH_COHB:
        sao2 = float(so2_in_blood(gas.pao2_mmhg, gas.ph, gas.paco2_mmhg)) if gas.sao2 is None else gas.sao2
        said.append(
            f"Carboxyhaemoglobin {100 * cohb:.0f} %: SpO2 reads it as oxygenated, and SaO2 here leaves it "
            f"out; about {100 * sao2 * (1 - cohb - methb):.0f} % of all haemoglobin carries "
            "oxygen. A high FiO2 is also its treatment, and no SpO2 shows what a lower one does."
        )
    if methb >= MUCH_METHB:
        said.append(
            f"Methaemoglobin {100 * methb:.0f} %: SpO2 drifts towards 85 % whatever the saturation is, and "
            "SaO2 here leaves it out; no SpO2 shows what a change of FiO2 does."
        )
    step = _lowered_by(changed.get("fio2"))
    if step > 0 and not blind:
        said.append("With a lower FiO2 watch SpO2 until the gas: above 96 % it says little about PaO2.")
    if step >= LARGE_FIO2_STEP:
        said.append(
            "A large step down: P/F does not stay as it is, and near the knee of the curve saturation falls "
            "fast. Smaller steps, each with a look after about 10 min, show where the knee lies."
        )
    if changed.get("fio2", (None, None))[1] == 1.0:
        said.append(
            "At FiO2 1.0 badly ventilated lung may collapse (absorption): shunt may grow, and how much is "
            "not known."
        )
    return said


def _acid_base(fit: Fit, p: Prediction) -> list[str]:
    """What a normal PaCO2 would mean in metabolic acidosis and in chronic hypercapnia."""
    said, excess = [], float(np.median(p.belief.of("standard_base_excess")))
    now = float(np.nanmedian(p.before.paco2_mmhg))
    if excess < SEVERE_BASE_DEFICIT:
        higher = [_ph_at(paco2, excess) for paco2 in (30.0, 40.0) if paco2 > now + WORTH_A_WORD_MMHG]
        holds = f": {', '.join(higher)}. The ventilation is what holds the pH" if higher else ""
        said.append(
            f"Metabolic acidosis (standard base excess {excess:.0f} mmol/L){holds}; "
            "less alveolar ventilation means less pH."
        )
    if "chronic_hypercapnia" in fit.case.patient.conditions:
        lower = [paco2 for paco2 in (50.0, 40.0) if paco2 < now - WORTH_A_WORD_MMHG]
        if lower and float(ph_at_standard_base_excess(lower[-1], excess)) > ALKALAEMIA:
            said.append(
                f"Chronic hypercapnia: {', '.join(_ph_at(paco2, excess) for paco2 in lower)}. "
                "A normal PaCO2 may be alkalaemia for this patient; pH leads."
            )
        else:
            said.append("Chronic hypercapnia: the usual PaCO2 of this patient is not a normal one; pH leads.")
    return said


def _lowered_by(change: tuple[object, object] | None) -> float:
    """How far a setting is lowered; 0 where it is not."""
    before, after = change or (None, None)
    if not isinstance(before, float | int) or not isinstance(after, float | int):
        return 0.0
    return max(before - after, 0.0)


def _ph_at(paco2_mmhg: float, excess: float) -> str:
    ph = float(ph_at_standard_base_excess(paco2_mmhg, excess))
    return f"a PaCO2 of {paco2_mmhg:.0f} mmHg would mean a pH of about {ph:.2f}"


def _trapping(fit: Fit, p: Prediction, changed: dict[str, tuple[object, object]]) -> list[str]:
    timing = {"rate_per_min", "tidal_volume_ml", "inspiratory_time_s", "ie_ratio"} & changed.keys()
    if not p.breathing.obstructive or not timing:
        return []
    return [
        "Obstructive disease: gas that is trapped at a faster rate adds dead space and pressure. A higher "
        "rate may clear little and raises plateau and trapped pressure, which are not forecast; a lower one "
        "costs less PaCO2 than the plain equation says. How much is unknown and is in the interval."
    ]


def _since_then(fit: Fit, p: Prediction) -> list[str]:
    """What was charted beside or since the last gas and does not fit it."""
    said = []
    gas = fit.case.entries[fit.gas_number].gas
    if (
        gas is not None
        and gas.temperature_corrected
        and abs((gas.temperature_c or 37.0) - 37.0) > FAR_FROM_37_C
    ):
        said.append(
            f"The last gas was printed for {gas.temperature_c:.1f} C; now and expected are both at 37 C, and "
            "cannot be laid beside a print for another temperature."
        )
    for entry in reversed(fit.case.entries):
        if entry.time <= fit.gas_time:
            break
        if entry.measured is not None and entry.measured.spo2 is not None:
            low, high = np.nanquantile(p.before.sao2, [0.25, 0.75])
            if not low - SPO2_AWAY <= entry.measured.spo2 <= high + SPO2_AWAY:
                said.append(
                    f"SpO2 of {100 * entry.measured.spo2:.0f} % charted since the last gas does not fit "
                    f"it (about {100 * low:.0f} to {100 * high:.0f} % would): the lung may have changed, and "
                    "this forecast does not know it."
                )
            break
    charted = fit.case.entries[fit.gas_number].settings
    if charted is not None and settings_at(fit.case, fit.gas_number - 1).differing(charted):
        said.append(
            "A change charted together with the last gas has no time of its own: the gas is taken as settled "
            "after it."
        )
    return said


def _breathing(
    fit: Fit,
    p: Prediction,
    settings: Settings,
    changed: dict[str, tuple[object, object]],
    effort_stops: bool,
) -> list[str]:
    said, own = [], p.breathing.own_rate
    if effort_stops:
        said.append(
            "If breathing effort stops (paralysis, sedation) the set rate and volume alone ventilate: this "
            "is that forecast."
        )
        if settings.mode != "volume":
            said.append(
                "The volume is still the one that effort and pressure made together: without effort it will "
                "be smaller, by an unknown amount, and PaCO2 higher."
            )
    elif own.triggering and own.per_min is not None:
        said.append(
            f"The patient breathes at {own.per_min:.0f}/min of their own: a set rate below that changes next "
            "to nothing, a higher one at most part; if effort stops the set rate alone remains."
        )
    if settings.mode in ("support", "other"):
        said.append(
            "In this mode the patient makes the volume: the forecast holds only for the total rate and tidal "
            "volume shown."
        )
    elif settings.mode == "pressure" and not p.breathing.tidal_volume_charted:
        said.append(
            f"In pressure mode the volume follows the lung: {p.breathing.tidal_volume_ml:.0f} mL is expected "
            "from the pressure at an unchanged compliance."
        )
    if {"inspiratory_time_s", "ie_ratio", "pause_s", "flow_l_per_min", "mode"} & changed.keys():
        said.append("Pause, inspiratory time and flow alone shift PaCO2 by about 10 %; that is not forecast.")
    return said


def _devices(changed: dict[str, tuple[object, object]]) -> list[str]:
    if not {"humidifier", "apparatus_dead_space_ml"} & changed.keys():
        return []
    return [
        "Swapping a device means a disconnection: lung volume may be lost, and PaO2 may fall for a while."
    ]


def _age(fit: Fit, at: datetime) -> list[str]:
    said, age = [], at - fit.gas_time
    if age > STALE_AFTER:
        said.append(
            f"The last gas is {age / timedelta(hours=1):.0f} h old: the lung may have moved more than the "
            "interval says."
        )
    since = [
        e for entry in fit.case.entries if entry.time > fit.gas_time for e in entry.events if e in RESETTING
    ]
    if since:
        said.append(
            f"Since the last gas: {', '.join(dict.fromkeys(since))}. No forecast is firm before a new gas."
        )
    early = underway_at(fit.case, fit.gas_time)
    if early is not None and early.minutes < UNSETTLED_MINUTES:
        names = ", ".join(SETTING_WORDS[name] for name in early.changed)
        said.append(
            f"The last gas was drawn {early.minutes:.0f} min after a change ({names}): it had not settled, "
            "and what it read is not where that change ends."
        )
    return said


def _identification(fit: Fit) -> list[str]:
    said = []
    oxygen = {s.fio2 for e, s in fit.case.entries_with_settings() if e.gas is not None}
    if len(oxygen) == 1:
        said.append("Shunt and V/Q spread are not yet told apart: all gases so far at one FiO2.")
    if fit.case.site.barometric_mmhg is None and fit.case.site.altitude_m is None:
        said.append("Barometric pressure is not given: 760 mmHg is assumed.")
    if fit.distinct < FEW_ANCESTORS:
        said.append(
            "The last gas was a surprise to the model: few of its explanations fit. Read the intervals as "
            "too narrow."
        )
    return said
