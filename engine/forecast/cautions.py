"""What a forecast does not know and what must be read beside it, in plain sentences. Never an order."""

from datetime import datetime, timedelta

import numpy as np

from engine.fit import Fit
from engine.forecast.predict import Prediction
from engine.lung.prior import logistic
from engine.physics.acid_base import ph_at_standard_base_excess
from engine.record import Settings

STALE_AFTER = timedelta(hours=8)
LEAST_VOLUME_OVER_SERIES = 1.5  # below it streaming flow carries gas and no forecast of PaCO2 is made (briscoe1954)
MUCH_SHUNT = 0.30
MUCH_COHB = 0.10
SEVERE_BASE_DEFICIT = -10.0
FEW_ANCESTORS = 40
RESETTING = ("prone", "drain", "recruitment", "reintubation")

NO_SUPPORT = (
    "Not forecast: the patient is under extracorporeal support, and the gas no longer tells what the lung does."
)
NO_PEEP = (
    "PaO2 and SaO2 are not forecast: how a lung answers a change of PEEP cannot be read off its gases "
    "(P/F changed by -16 to 47 mmHg in half of 983 trials of protocol steps)."
)


def too_small_a_breath(p: Prediction) -> bool:
    """Whether the tidal volume is under 1.5 times the series dead space in most draws."""
    return bool(p.breathing.tidal_volume_ml < LEAST_VOLUME_OVER_SERIES * np.median(p.series_ml))


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
        *_not_forecast(p, changed),
        *_harmful_readings(fit, p, changed),
        *_breathing(fit, p, settings, changed, effort_stops),
        *_devices(changed),
        *_age(fit, at),
        *_identification(fit),
    ]
    return (
        *said,
        "It is assumed that nothing else has changed since the last gas: effort, secretions, circulation, "
        "position, temperature.",
    )


def _not_forecast(p: Prediction, changed: dict[str, tuple[object, object]]) -> list[str]:
    said = []
    if "peep_cmh2o" in changed:
        said.append(NO_PEEP)
    if too_small_a_breath(p):
        said.append(
            f"PaCO2 and pH are not forecast: a tidal volume of {p.breathing.tidal_volume_ml:.0f} mL is less than "
            f"1.5 times the series dead space (about {np.median(p.series_ml):.0f} mL)."
        )
    return said


def _harmful_readings(fit: Fit, p: Prediction, changed: dict[str, tuple[object, object]]) -> list[str]:
    said = []
    excess = float(np.median(p.belief.of("standard_base_excess")))
    conditions = fit.case.patient.conditions
    if excess < SEVERE_BASE_DEFICIT:
        said.append(
            f"Metabolic acidosis (standard base excess {excess:.0f} mmol/L): {_ph_at(30, excess)}, {_ph_at(40, excess)}. "
            "The hyperventilation is what holds the pH; less alveolar ventilation means less pH."
        )
    if "chronic_hypercapnia" in conditions:
        said.append(
            f"Chronic hypercapnia: {_ph_at(50, excess)}, {_ph_at(40, excess)}. "
            "A normal PaCO2 may be alkalaemia for this patient; pH leads."
        )
    gas = fit.case.entries[fit.gas_number].gas
    shunt = float(np.median(logistic(p.belief.of("logit_shunt"))))
    lowered = _lowered(changed.get("fio2"))
    if shunt > MUCH_SHUNT:
        said.append(
            f"About {100 * shunt:.0f} % of the blood passes lung without air: FiO2 moves PaO2 little, though saturation more. "
            "The rest is for the team (PEEP, recruitment, position, secretions) and is not forecast. "
            "Lowering FiO2 still desaturates."
        )
    if gas is not None and gas.cohb is not None and gas.cohb >= MUCH_COHB:
        said.append(
            f"Carboxyhaemoglobin {100 * gas.cohb:.0f} %: SpO2 reads it as oxygenated, and SaO2 here leaves it out; "
            f"about {100 * (gas.sao2 or 1.0) * (1 - gas.cohb - (gas.methb or 0.0)):.0f} % of all haemoglobin carries oxygen. "
            "A high FiO2 is also its treatment."
        )
    if lowered:
        said.append("With a lower FiO2 watch SpO2 until the gas: above 96 % it says little about PaO2.")
    if changed.get("fio2", (None, None))[1] == 1.0:
        said.append(
            "At FiO2 1.0 badly ventilated lung may collapse (absorption): shunt may grow, and that is not known."
        )
    return said


def _lowered(change: tuple[object, object] | None) -> bool:
    if change is None:
        return False
    before, after = change
    return isinstance(before, float | int) and isinstance(after, float | int) and after < before


def _ph_at(paco2_mmhg: float, excess: float) -> str:
    return f"a PaCO2 of {paco2_mmhg:.0f} mmHg would mean a pH of about {float(ph_at_standard_base_excess(paco2_mmhg, excess)):.2f}"


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
            "If breathing effort stops (paralysis, sedation) the set rate and volume alone ventilate: this is that forecast."
        )
    elif own.triggering and own.per_min is not None:
        said.append(
            f"The patient breathes at {own.per_min:.0f}/min of their own: a set rate below that changes next to nothing, "
            "a higher one at most part; if effort stops the set rate alone remains."
        )
    if settings.mode in ("support", "other"):
        said.append(
            "In this mode the patient makes the volume: the forecast holds only for the total rate and tidal volume shown."
        )
    elif settings.mode == "pressure" and not p.breathing.tidal_volume_charted:
        said.append(
            f"In pressure mode the volume follows the lung: {p.breathing.tidal_volume_ml:.0f} mL is expected from the pressure at an "
            "unchanged compliance."
        )
    if {"inspiratory_time_s", "ie_ratio", "pause_s", "flow_l_per_min", "mode"} & changed.keys():
        said.append("Pause, inspiratory time and flow alone shift PaCO2 by about 10 %; that is not forecast.")
    return said


def _devices(changed: dict[str, tuple[object, object]]) -> list[str]:
    if not {"humidifier", "apparatus_dead_space_ml"} & changed.keys():
        return []
    return ["Swapping a device means a disconnection: lung volume may be lost, and PaO2 may fall for a while."]


def _age(fit: Fit, at: datetime) -> list[str]:
    said, age = [], at - fit.gas_time
    if age > STALE_AFTER:
        said.append(
            f"The last gas is {age / timedelta(hours=1):.0f} h old: the lung may have moved more than the interval says."
        )
    since = [e for entry in fit.case.entries[fit.gas_number :] for e in entry.events if e in RESETTING]
    if since:
        said.append(
            f"Since the last gas: {', '.join(dict.fromkeys(since))}. No forecast is firm before a new gas."
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
        said.append("The last gas was a surprise to the model: few of its explanations fit. Read the intervals as too narrow.")
    return said
