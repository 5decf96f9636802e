"""One entry of the chart with what stood around it: settings, readings nearby, air pressure."""

from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import NamedTuple

from engine.physics.acid_base import hco3_mmol_per_l, standard_base_excess_mmol_per_l
from engine.physics.air import STANDARD_BAROMETRIC_MMHG, barometric_mmhg_from_altitude
from engine.physics.carbon_dioxide import pco2_at_temperature_mmhg
from engine.physics.oxygen import po2_at_37_mmhg
from engine.record import BloodGas, Case, Entry, Measured, Settings, Site

READING_HOLDS_HOURS = 4.0
"""How long a reading of volume or rate speaks for the breath (the case format's rule for exhaled volumes)."""

SETTING_WORDS = {
    "mode": "mode",
    "rate_per_min": "rate",
    "tidal_volume_ml": "tidal volume",
    "inspiratory_pressure_cmh2o": "inspiratory pressure",
    "support_pressure_cmh2o": "support pressure",
    "fio2": "FiO2",
    "peep_cmh2o": "PEEP",
    "inspiratory_time_s": "inspiratory time",
    "ie_ratio": "I:E",
    "flow_l_per_min": "flow",
    "pause_s": "pause",
    "humidifier": "humidifier",
    "apparatus_dead_space_ml": "apparatus dead space",
    "airway": "airway",
}
"""Settings fields as they are spoken."""

LEAST_RATE_PER_MIN = 0.5
"""Less is a disconnected patient, not a rate to compute with."""

_LEAST_BREATH_ML = 1.0
_BODY_C = 37.0
_PH_PER_C = -0.0147  # anaerobic blood, T. B. Rosenthal, J. Biol. Chem. 173, 25-30, 1948 (from memory)


class At37(NamedTuple):
    """pH and tensions as an analyser prints them at 37 C."""

    ph: float
    paco2_mmhg: float
    pao2_mmhg: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Moment:
    """Entry ``number`` (from 0) of a case; ``stood`` holds the settings in force after each entry."""

    case: Case
    number: int
    stood: tuple[Settings, ...]

    @property
    def before(self) -> Settings:
        """The settings in force until this entry."""
        return self.stood[self.number - 1] if self.number else Settings()

    @property
    def settings(self) -> Settings:
        """The settings in force from this entry on."""
        return self.stood[self.number]

    @property
    def entry(self) -> Entry:
        return self.case.entries[self.number]

    @property
    def time(self) -> datetime:
        return self.entry.time

    @property
    def gas(self) -> BloodGas:
        """The gas of this entry; only for entries that have one."""
        gas = self.entry.gas
        if gas is None:
            raise LookupError(f"entry {self.number + 1} has no gas")
        return gas

    @property
    def usable(self) -> bool:
        """Whether the gas of this entry can be used (`Case.usable_gases`)."""
        return self.number in self.case.usable_gases()

    def measured(self, name: str) -> float | None:
        """A reading charted in this very entry."""
        value: float | None = getattr(self.entry.measured or Measured(), name)
        return value

    def latest(self, name: str, hours: float = READING_HOLDS_HOURS) -> tuple[float, datetime] | None:
        """The newest reading of a `Measured` field up to this entry, at most ``hours`` old, and its time."""
        for entry in reversed(self.case.entries[: self.number + 1]):
            if self.time - entry.time > timedelta(hours=hours):
                return None
            value = getattr(entry.measured or Measured(), name)
            if value is not None:
                return value, entry.time
        return None

    def nearest(self, name: str, minutes: float) -> tuple[float, datetime] | None:
        """The reading of a `Measured` field closest to the drawing of this gas, and its time."""
        drawn = self.entry.gas_time
        near = [
            (abs(entry.time - drawn), value, entry.time)
            for entry in self.case.entries
            if (value := getattr(entry.measured or Measured(), name)) is not None
        ]
        if not near:
            return None
        gap, value, time = min(near, key=lambda found: found[0])
        return (value, time) if gap <= timedelta(minutes=minutes) else None

    def since(self, field: str) -> datetime:
        """When the settings field took the value it has now: the entry that first gave it, seen from here."""
        value, start = getattr(self.settings, field), self.time
        for entry, settings in zip(
            self.case.entries[self.number :: -1], self.stood[self.number :: -1], strict=True
        ):
            if getattr(settings, field) != value:
                break
            start = entry.time
        return start


def moments(case: Case) -> tuple[Moment, ...]:
    """Every entry of the case as a `Moment`, in order."""
    stood = tuple(settings for _, settings in case.entries_with_settings())
    return tuple(Moment(case=case, number=number, stood=stood) for number in range(len(stood)))


def tidal_volume_ml(moment: Moment) -> tuple[float, str] | None:
    """The breath in force and where it comes from: ``set``, ``exhaled at HH:MM`` or ``last set``.

    In `volume` the set volume rules; where the ventilator sets a pressure, the exhaled one of the last four
    hours, else the last set one (the case format's rule). None where neither is charted.
    """
    volume = moment.settings.tidal_volume_ml
    if moment.settings.mode == "volume" and volume is not None:
        return volume, "set"
    exhaled = moment.latest("exhaled_tidal_volume_ml")
    if exhaled is not None and exhaled[0] >= _LEAST_BREATH_ML:
        return exhaled[0], f"exhaled at {exhaled[1]:%H:%M}"
    return (volume, "last set") if volume is not None else None


def breaths_per_min(moment: Moment) -> tuple[float, str] | None:
    """The rate in force and where it comes from: ``measured at HH:MM``, or ``set``.

    A measured total rate of the last four hours rules unless the set rate was changed after it, or stands
    above it. None where no rate is charted, or hardly any.
    """
    rate = moment.settings.rate_per_min
    total = moment.latest("total_rate_per_min")
    if total is not None and total[1] >= moment.since("rate_per_min") and total[0] >= (rate or 0.0):
        rate, whence = total[0], f"measured at {total[1]:%H:%M}"
    else:
        whence = "set"
    return (rate, whence) if rate is not None and rate >= LEAST_RATE_PER_MIN else None


def station_pressure_mmhg(site: Site) -> tuple[float, str]:
    """Barometric pressure at the bedside and where it comes from: measured, from the altitude, or assumed."""
    if site.barometric_mmhg is not None:
        return site.barometric_mmhg, "measured at the station"
    if site.altitude_m is not None:
        return float(barometric_mmhg_from_altitude(site.altitude_m)), "standard air at "
        f"{site.altitude_m:g} m"
    return STANDARD_BAROMETRIC_MMHG, "assumed, as at sea level"


def at_37(gas: BloodGas) -> At37:
    """The gas as an analyser prints it at 37 C; only one marked ``temperature_corrected`` changes.

    PaCO2 by the analysers' own factor (symmetric about 37 C, so that the temperature mirrored there undoes
    it), PaO2 by the inverse of Severinghaus 1979 eq. 3, pH by -0.0147 per degree.
    """
    if not gas.temperature_corrected or gas.temperature_c is None:
        return At37(gas.ph, gas.paco2_mmhg, gas.pao2_mmhg)
    warmer_c = gas.temperature_c - _BODY_C
    return At37(
        gas.ph - _PH_PER_C * warmer_c,
        float(pco2_at_temperature_mmhg(gas.paco2_mmhg, _BODY_C - warmer_c)),
        float(po2_at_37_mmhg(gas.pao2_mmhg, gas.temperature_c)),
    )


def bicarbonate_mmol_per_l(gas: BloodGas) -> float:
    """Bicarbonate computed from pH and PaCO2 at 37 C."""
    ph, paco2_mmhg, _ = at_37(gas)
    return float(hco3_mmol_per_l(ph, paco2_mmhg))


def base_excess_mmol_per_l(gas: BloodGas) -> float:
    """Standard base excess computed from pH and PaCO2 at 37 C."""
    ph, paco2_mmhg, _ = at_37(gas)
    return float(standard_base_excess_mmol_per_l(ph, paco2_mmhg))
