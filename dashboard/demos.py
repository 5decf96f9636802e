"""The invented patients that come with the program, moved in time to the present."""

import re
from contextlib import suppress
from dataclasses import replace
from datetime import UTC, datetime, timedelta, tzinfo
from pathlib import Path

from engine.reading.case_file import BadCase, read_case
from engine.record import Case, Entry

FOLDER = Path(__file__).parents[1] / "demo_patients"
LAST_GAS_AGE = timedelta(minutes=20)


_CAPITALS = {"ards": "ARDS", "icp": "ICP"}


def demo_titles() -> dict[str, str]:
    """Name (of the file, without ending) and title of every demo that can be read, in the order of the beds.

    "Bed 1 · early ARDS" for ``early_ards.json``.
    """
    titles: dict[str, str] = {}
    for path in sorted(FOLDER.glob("*.json")):
        with suppress(BadCase):
            titles[path.stem] = f"{read_case(path).label} · {_words(path.stem)}"
    return dict(sorted(titles.items(), key=lambda item: _in_bed_order(item[1])))


def _words(name: str) -> str:
    return " ".join(_CAPITALS.get(word, word) for word in name.split("_"))


def _in_bed_order(title: str) -> list[tuple[int, str]]:
    """Bed 2 before bed 10."""
    return [(int(part), "") if part.isdigit() else (0, part) for part in re.split(r"(\d+)", title)]


def demo_case(name: str, now: datetime) -> Case:
    """The demo patient, with all times shifted so that the last usable gas was drawn 20 minutes before
    ``now``.

    Raises
    ------
    BadCase
        The file is not a good case.
    """
    return moved_to_present(read_case(FOLDER / f"{name}.json"), now)


def moved_to_present(case: Case, now: datetime) -> Case:
    """``case`` shifted as a whole, to the minute, in its zone; the gaps between entries stay.

    A case without a gas stays where it is.
    """
    gases = case.usable_gases()
    if not gases:
        return case
    shift = now.replace(second=0, microsecond=0) - LAST_GAS_AGE - case.entries[gases[-1]].gas_time
    return moved(case, shift, now.tzinfo)


def moved(case: Case, shift: timedelta, zone: tzinfo | None) -> Case:
    """``case`` with every time shifted and told in ``zone``, so that all words on a screen use one clock."""

    def at(time: datetime) -> datetime:
        return (time.astimezone(UTC) + shift).astimezone(zone)

    def entry(old: Entry) -> Entry:
        gas = old.gas
        if gas is not None and gas.drawn_at is not None:
            gas = replace(gas, drawn_at=at(gas.drawn_at))
        return replace(old, time=at(old.time), gas=gas)

    return replace(case, entries=tuple(entry(old) for old in case.entries))
