"""Whose data this is and how old: the line that stays in view."""

from datetime import datetime, timedelta
from html import escape

from dashboard.wording import OLD_HOURS, age_text, clock_text
from engine.record import Case


def who_line(case: Case, demo: bool, live: bool, clock: datetime) -> str:
    """Bed label, sex, height, last usable gas and settings with their ages; a demo is marked as one.

    Ages count from the ``clock``, whatever moment the rest of the screen speaks of. Where the case is not
    ``live``, that moment is its last entry, and the line says so.
    """
    patient = case.patient
    person = [patient.sex or "sex not charted"]
    person.append(f"{patient.height_cm:g} cm" if patient.height_cm else "height not charted")
    parts = [
        f"<b>{escape(case.label)}</b>",
        f"<span>{escape(', '.join(person))}</span>",
        _last_gas(case, clock),
    ]
    settings = settings_changed_at(case)
    if settings is not None:
        parts.append(
            f"<span>settings since {clock_text(settings, clock)} <em>{age_text(settings, clock)}</em></span>"
        )
    if not live:
        last = case.entries[-1].time.astimezone(clock.tzinfo)
        parts.append(
            f'<span class="fb-old">Not live: file of {last.day} {last:%b %Y}, read as of its last entry at '
            f"{last:%H:%M}</span>"
        )
    if demo:
        parts.append('<span class="fb-demo">Demo: invented patient</span>')
    return f'<div class="fb-who">{"".join(parts)}</div>'


def _last_gas(case: Case, clock: datetime) -> str:
    gases = case.usable_gases()
    if not gases:
        return "<span>no usable gas</span>"
    drawn = case.entries[gases[-1]].gas_time
    age = f"<em>{age_text(drawn, clock)}</em>"
    if clock - drawn > timedelta(hours=OLD_HOURS):
        age = (
            f'<em class="fb-old">{age_text(drawn, clock)}: older than {OLD_HOURS} h, '
            "the lung may have moved since</em>"
        )
    return f"<span>last gas {clock_text(drawn, clock)} {age}</span>"


def settings_changed_at(case: Case) -> datetime | None:
    """When a setting was last given another value; the first entry with settings where none was."""
    found: datetime | None = None
    before = None
    for entry, settings in case.entries_with_settings():
        if entry.settings is not None and (before is None or before.differing(settings)):
            found = entry.time
        if entry.settings is not None:
            before = settings
    return found
