"""One patient's stay, whole: entries in order, each gas with the settings it was drawn under."""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Self

from engine.record.guard import Impossible
from engine.record.parts import Entry, Patient, Settings, Site, Target

NOBODY_KNOWN, NOWHERE_KNOWN = Patient(), Site()  # nothing charted of the patient, or of the place


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """One patient's stay: who, where, the target, and entries in strictly rising time."""

    label: str
    patient: Patient = NOBODY_KNOWN
    site: Site = NOWHERE_KNOWN
    target: Target | None = None
    entries: tuple[Entry, ...] = ()

    def __post_init__(self) -> None:
        if not self.label.strip():
            raise Impossible("label", self.label, "a bed label")
        for number, (earlier, later) in enumerate(zip(self.entries, self.entries[1:], strict=False), start=2):
            if later.time <= earlier.time:
                raise Impossible(
                    f"entries[{number}].time",
                    later.time.isoformat(),
                    f"a time after {earlier.time.isoformat()}",
                )
        _refuse_gases_out_of_order(self.entries)
        for number, (entry, settings) in enumerate(self.entries_with_settings(), start=1):
            if entry.gas is not None:
                _refuse_gas_without_settings(f"entries[{number}].settings", settings, self, number)

    def entries_with_settings(self) -> Iterator[tuple[Entry, Settings]]:
        """Each entry with the settings in force from it on."""
        in_force = Settings()
        for entry in self.entries:
            in_force = in_force.then(entry.settings)
            yield entry, in_force

    def before(self, number: int) -> Self:
        """The case as it stood before entry ``number`` (from 0)."""
        return replace(self, entries=self.entries[:number])

    def usable_gases(self) -> tuple[int, ...]:
        """Numbers (from 0) of the entries whose gas can be used.

        Usable is arterial, not excluded and not under extracorporeal support.
        """
        numbers, supported = [], "extracorporeal" in self.patient.conditions
        for number, entry in enumerate(self.entries):
            if "extracorporeal_start" in entry.events:
                supported = True
            gas = entry.gas
            if gas is not None and gas.specimen == "arterial" and not gas.excluded and not supported:
                numbers.append(number)
            if "extracorporeal_stop" in entry.events:
                supported = False
        return tuple(numbers)

    def extracorporeal_now(self) -> bool:
        """Whether extracorporeal support runs after the last entry."""
        supported = "extracorporeal" in self.patient.conditions
        for entry in self.entries:
            if "extracorporeal_start" in entry.events:
                supported = True
            if "extracorporeal_stop" in entry.events:
                supported = False
        return supported


def _refuse_gases_out_of_order(entries: tuple[Entry, ...]) -> None:
    """Arterial gases follow each other in the order they were drawn, and none stands twice."""
    last: datetime | None = None
    for number, entry in enumerate(entries, start=1):
        if entry.gas is None or entry.gas.specimen != "arterial" or entry.gas.excluded:
            continue
        if last is not None and entry.gas_time <= last:
            expected = f"a time after the arterial gas before it, {last.isoformat()}"
            raise Impossible(f"entries[{number}].gas.drawn_at", entry.gas_time.isoformat(), expected)
        last = entry.gas_time


def _refuse_gas_without_settings(where: str, settings: Settings, case: Case, number: int) -> None:
    """A gas needs mode, FiO2, rate and a tidal volume in force: set, or exhaled where no volume is set."""
    for name in ("mode", "fio2", "rate_per_min"):
        if getattr(settings, name) is None:
            raise Impossible(f"{where}.{name}", None, "a value in force at this gas")
    exhaled = any(e.measured and e.measured.exhaled_tidal_volume_ml for e in case.entries[:number])
    if settings.tidal_volume_ml is None and (settings.mode == "volume" or not exhaled):
        expected = (
            "a set tidal volume in force" if settings.mode == "volume" else "one in force, set or exhaled"
        )
        raise Impossible(f"{where}.tidal_volume_ml", None, expected)
    if settings.rate_per_min == 0 and settings.mode != "support":
        raise Impossible(f"{where}.rate_per_min", 0, "more than 0 outside support mode")
