"""The invented patients that come with the program, moved in time to the present."""

from dataclasses import replace
from datetime import datetime, timedelta
from pathlib import Path

from engine.reading.case_file import read_case
from engine.record import Case, Entry

FOLDER = Path(__file__).parents[1] / "demo_patients"
LAST_GAS_AGE = timedelta(minutes=20)


def demo_names() -> tuple[str, ...]:
    """Names of the demo files, without ending, in order."""
    return tuple(sorted(path.stem for path in FOLDER.glob("*.json")))


def title_of(name: str) -> str:
    """A file name as words: "early_ards" is "Early ards"."""
    words = name.replace("_", " ").replace("-", " ").strip()
    return words[:1].upper() + words[1:]


def demo_case(name: str, now: datetime) -> Case:
    """The demo patient, with all times shifted so that the last usable gas was drawn 20 minutes before ``now``.

    Raises
    ------
    BadCase
        The file is not a good case.
    """
    return moved_to_present(read_case(FOLDER / f"{name}.json"), now)


def moved_to_present(case: Case, now: datetime) -> Case:
    """``case`` shifted as a whole, to the minute; the gaps between entries stay. A case without a gas stays."""
    gases = case.usable_gases()
    if not gases:
        return case
    shift = now.replace(second=0, microsecond=0) - LAST_GAS_AGE - case.entries[gases[-1]].gas_time
    return replace(case, entries=tuple(_shifted(entry, shift) for entry in case.entries))


def _shifted(entry: Entry, shift: timedelta) -> Entry:
    gas = entry.gas
    if gas is not None and gas.drawn_at is not None:
        gas = replace(gas, drawn_at=gas.drawn_at + shift)
    return replace(entry, time=entry.time + shift, gas=gas)
