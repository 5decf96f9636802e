"""What one browser tab holds, and everything a hand can do to it. The only file that touches session state.

A tab holds the patients it has seen, which one is in hand, the change being tried and the steps back from it. Trying
saves nothing. The functions below are the widgets' callbacks: they change the `Bed` and keep the text in every field
equal to the value in use, so that no field ever shows one number while another is computed with.
"""

from collections.abc import MutableMapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import streamlit as st

from dashboard import demos, typed
from dashboard.wording import FIELDS, Units
from engine.reading.case_file import BadCase, case_from_bytes
from engine.record import CHOICES, Case, Settings

STEPS_BACK = 50


@dataclass(frozen=True, slots=True, kw_only=True)
class Held:
    """A patient this tab has seen: a demo, shifted to the present, or an uploaded case."""

    case: Case
    title: str
    demo: bool


@dataclass(slots=True, kw_only=True)
class Bed:
    """The state behind the screen Bed."""

    patients: dict[str, Held] = field(default_factory=dict)
    chosen: str | None = None
    tried: dict[str, object] = field(default_factory=dict)
    effort_stops: bool = False
    earlier: list[tuple[dict[str, object], bool]] = field(default_factory=list)
    refused: dict[str, str] = field(default_factory=dict)
    upload_says: tuple[bool, str] | None = None
    uploads: int = 0
    units: Units = Units()

    @property
    def in_hand(self) -> Held | None:
        """The patient now on the screen."""
        return self.patients.get(self.chosen or "")


def bed() -> Bed:
    """The tab's state, made at its first visit with the first demo patient in hand."""
    if "bed" not in st.session_state:
        st.session_state["bed"] = Bed()
        names = demos.demo_names()
        if names:
            _take_demo(names[0])
    held: Bed = st.session_state["bed"]
    return held


def now() -> datetime:
    """The clock of this machine, in the zone of the browser; UTC where it does not say."""
    try:
        return datetime.now(ZoneInfo(st.context.timezone or "UTC"))
    except (ZoneInfoNotFoundError, ValueError):
        return datetime.now(UTC)


# ---------------------------------------------------------------------------------------------------------- patients


def patient_options() -> dict[str, str]:
    """Key and title of every patient that can be chosen: uploads of this tab first, then the demos."""
    uploads = {key: held.title for key, held in bed().patients.items() if not held.demo}
    return uploads | {f"demo:{name}": f"Demo · {demos.title_of(name)}" for name in demos.demo_names()}


def choose_patient() -> None:
    """Callback of the patient selector."""
    key = st.session_state["patient"]
    if key in bed().patients:
        _take(key)
    elif key is not None:
        _take_demo(key.removeprefix("demo:"))


def _take_demo(name: str) -> None:
    key = f"demo:{name}"
    try:
        case = demos.demo_case(name, now())
    except BadCase as why:
        bed().upload_says = (False, str(why))
        return
    bed().patients[key] = Held(case=case, title=demos.title_of(name), demo=True)
    _take(key)


def take_upload() -> None:
    """Callback of the file chooser: a good case comes to hand, a bad one leaves everything as it was."""
    state, upload = bed(), st.session_state[upload_key()]
    if upload is None:
        return
    try:
        case = case_from_bytes(upload.getvalue(), upload.name)
    except BadCase as why:
        state.upload_says = (False, str(why))
        return
    finally:
        state.uploads += 1  # a fresh chooser, so that the same file can be chosen again once mended
    key = f"upload:{state.uploads}"
    state.patients[key] = Held(case=case, title=f"{case.label} · uploaded file", demo=False)
    _take(key)
    state.upload_says = (True, f"{case.label}: {len(case.entries)} entries read from the file.")


def upload_key() -> str:
    """Key of the file chooser now on the screen."""
    return f"upload_{bed().uploads}"


def _take(key: str) -> None:
    state = bed()
    state.chosen, state.upload_says = key, None
    state.tried, state.effort_stops, state.earlier, state.refused = {}, False, [], {}
    st.session_state["patient"] = key
    _rewrite_fields()


# ------------------------------------------------------------------------------------------------- trying a change


def charted() -> Settings:
    """The settings in force after the last entry of the patient in hand."""
    held, last = bed().in_hand, Settings()
    for _, last in held.case.entries_with_settings() if held else ():
        pass
    return last


def in_use(name: str) -> Any:
    """The value of a setting that the forecast is made with: the tried one, else the charted one."""
    state = bed()
    return state.tried[name] if name in state.tried else getattr(charted(), name)


def tries_something() -> bool:
    """Whether anything differs from what is charted."""
    return bool(bed().tried) or bed().effort_stops


def field_key(name: str) -> str:
    """Key of the widget of one setting."""
    return f"try_{name}"


def type_number(name: str) -> None:
    """Callback of a number field: use what was typed, or say why not and keep the value in use."""
    try:
        value = typed.read(st.session_state[field_key(name)], FIELDS[name]).value
    except typed.Unclear as why:
        bed().refused[name] = why.says
        return
    _try(name, getattr(charted(), name) if value is None else value)


def step_number(name: str, direction: int) -> None:
    """Callback of the − and + beside a number field."""
    _try(name, typed.stepped(in_use(name), direction, FIELDS[name]))


def choose_humidifier() -> None:
    """Callback of the humidifier."""
    choice = st.session_state[field_key("humidifier")]
    _try("humidifier", choice if choice in CHOICES["humidifier"] else charted().humidifier)


def toggle_effort() -> None:
    """Callback of "If breathing effort stops"."""
    _remember()
    bed().effort_stops = bool(st.session_state["effort_stops"])


def undo() -> None:
    """One step back."""
    state = bed()
    if state.earlier:
        state.tried, state.effort_stops = state.earlier.pop()
    state.refused = {}
    _rewrite_fields()


def as_charted() -> None:
    """Everything back to the settings charted last; undo brings the change back."""
    state = bed()
    _remember()
    state.tried, state.effort_stops, state.refused = {}, False, {}
    _rewrite_fields()


def _try(name: str, value: object) -> None:
    state = bed()
    state.refused.pop(name, None)
    if value != in_use(name):
        _remember()
        state.tried = {other: kept for other, kept in state.tried.items() if other != name}
        if value != getattr(charted(), name):
            state.tried[name] = value
    _rewrite_field(name)


def _remember() -> None:
    state = bed()
    state.earlier = [*state.earlier, (dict(state.tried), state.effort_stops)][-STEPS_BACK:]


def _rewrite_fields() -> None:
    for name in (*FIELDS, "humidifier"):
        _rewrite_field(name)
    st.session_state["effort_stops"] = bed().effort_stops


def _rewrite_field(name: str) -> None:
    value = in_use(name)
    st.session_state[field_key(name)] = FIELDS[name].on_screen(value) if name in FIELDS else value


# ------------------------------------------------------------------------------------------------------------ units


def choose_units() -> None:
    """Callback of the two unit choices."""
    chosen: MutableMapping[Any, Any] = st.session_state
    bed().units = Units(chosen["unit_gas"] or bed().units.gas, chosen["unit_haemoglobin"] or bed().units.haemoglobin)
