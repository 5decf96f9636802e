"""Doubtful input, found before it is believed: one function a check, one row an answer, each with its source.

A check never changes a value and never orders anything. It names the entry's time, the value and its unit,
and what is worth a look. Where it cannot judge, because something is not charted, it says so (``ok`` None).
"""

from collections.abc import Callable

from engine.checks import (
    breathing,
    haemoglobin,
    inspired,
    meaning,
    pressures,
    printed,
    sample,
    saturation,
    stay,
)
from engine.checks.moment import Moment, moments
from engine.checks.row import Check
from engine.record import Case

__all__ = ["OF_EACH_ENTRY", "OF_EACH_GAS", "OF_THE_STAY", "Check", "checks_for"]

OF_THE_STAY: tuple[Callable[[Case], Check | None], ...] = (
    stay.extracorporeal,
    stay.station_pressure,
    stay.predicted_weight,
    stay.height,
    stay.target_range,
    stay.target_for_condition,
    meaning.target_agrees,
    stay.pneumothorax,
    stay.gas_since,
    meaning.metabolic_acidosis,
    meaning.chronic_hypercapnia,
)
"""Asked once of a case; None where a check does not apply."""

OF_EACH_ENTRY: tuple[Callable[[Moment], Check | None], ...] = (
    breathing.triggering,
    breathing.breaths_missing,
    breathing.volume_for_this_body,
    breathing.exhaled_against_set,
    breathing.minute_volume,
    breathing.inverse_ratio,
    breathing.room_to_exhale,
    pressures.plateau_above_peep,
    pressures.peak_above_plateau,
    pressures.peep_against_plateau,
    pressures.total_peep,
    pressures.mean_pressure,
    pressures.pressure_above_peep,
    pressures.plateau_of_passive_patient,
    inspired.fio2_standing,
    inspired.fio2_stepped_to_full,
    saturation.oximeter_slip,
)
"""Asked of every entry; None where it lacks what the check is about."""

OF_EACH_GAS: tuple[Callable[[Moment], Check | None], ...] = (
    sample.used,
    sample.sample_time,
    sample.temperature_corrected,
    sample.settled,
    sample.not_venous,
    printed.in_their_places,
    printed.in_mmhg,
    printed.bicarbonate_printed,
    printed.bicarbonate_computed,
    printed.base_excess_step,
    saturation.saturation_on_the_curve,
    saturation.oximeter_against_gas,
    haemoglobin.carboxyhaemoglobin,
    haemoglobin.methaemoglobin,
    haemoglobin.haemoglobin_unit,
    haemoglobin.haemoglobin_step,
    inspired.below_alveolar,
    breathing.end_tidal,
)
"""Asked of every entry that carries a gas, usable or not."""


def checks_for(case: Case) -> tuple[Check, ...]:
    """All rows for a case, passed or not: first those of the stay, then those of each entry in order.

    Only `saturation.oximeter_slip` keeps silent when it passes, since a chart holds too many SpO2 readings.
    """
    rows = [check(case) for check in OF_THE_STAY]
    for moment in moments(case):
        rows += [check(moment) for check in OF_EACH_ENTRY]
        if moment.entry.gas is not None:
            rows += [check(moment) for check in OF_EACH_GAS]
    return tuple(row for row in rows if row is not None)
