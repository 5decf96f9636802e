"""What one browser tab holds, and everything a hand can do to it. The only file that touches session state.

A tab holds the patients it has seen, which one is in hand, the change being tried and the steps back from it.
Trying saves nothing. The functions below are the widgets' callbacks: they change the `Bed` and keep the text
in every field equal to the value in use, so that no field ever shows one number while another is computed
with. Where one choice moves another setting, as a humidifier moves apparatus dead space, the engine's
`settings_asked` says by how much; and what is forecast is `asked`, never more than the fields show.
"""

from collections.abc import Mapping, MutableMapping
from contextlib import suppress
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import streamlit as st

from dashboard import demos, typed
from dashboard.wording import FIELDS, Units
from engine.forecast import settings_asked
from engine.reading.case_file import BadCase, case_from_bytes
from engine.record import CHOICES, Case, Impossible, Settings

STEPS_BACK = 50
LIVE_WITHIN = timedelta(hours=24)  # a file whose last entry is farther off is read as of that entry


@dataclass(frozen=True, slots=True, kw_only=True)
class Held:
    """A patient this tab has seen: a demo, shifted to the present, or an uploaded case."""

    case: Case
    title: str
    demo: bool

    def moment(self, clock: datetime) -> datetime:
        """What the screen calls now: the clock, or the last entry of a file from another day."""
        if not self.case.entries:
            return clock
        last = self.case.entries[-1].time
        return max(clock, last) if self.live(clock) else last

    def live(self, clock: datetime) -> bool:
        """Whether the last entry lies near the clock."""
        return not self.case.entries or abs(clock - self.case.entries[-1].time) <= LIVE_WITHIN


@dataclass(slots=True, kw_only=True)
class Bed:
    """The state behind the screen Bed."""

    demos: dict[str, str] = field(default_factory=dict)
    patients: dict[str, Held] = field(default_factory=dict)
    chosen: str | None = None
    read: str | None = None
    charted: Settings = field(default_factory=Settings)
    tried: dict[str, object] = field(default_factory=dict)
    effort_stops: bool = False
    earlier: list[tuple[dict[str, object], bool]] = field(default_factory=list)
    refused: dict[str, str] = field(default_factory=dict)
    upload_says: tuple[bool, str] | None = None
    uploads: int = 0
    units: Units = field(default_factory=Units)

    @property
    def in_hand(self) -> Held | None:
        """The patient now on the screen."""
        return self.patients.get(self.chosen or "")


def bed() -> Bed:
    """The tab's state, made at its first visit with the first demo patient in hand."""
    if "bed" not in st.session_state:
        st.session_state["bed"] = Bed(demos=demos.demo_titles())
        if bed().demos:
            _take_demo(next(iter(bed().demos)))
    held: Bed = st.session_state["bed"]
    return held


def is_unread() -> bool:
    """Whether this patient has just come to hand, and the lung behind the gases is still to be read."""
    return bed().read != bed().chosen


def mark_read() -> None:
    """The patient in hand has been read: from here on changes are quick."""
    bed().read = bed().chosen


def moment() -> datetime:
    """The moment the screen speaks of, to the minute, in the zone of the browser."""
    held, clock = bed().in_hand, now().replace(second=0, microsecond=0)
    return held.moment(clock) if held is not None else clock


def now() -> datetime:
    """The clock of this machine, in the zone of the browser; UTC where it does not say."""
    try:
        return datetime.now(ZoneInfo(st.context.timezone or "UTC"))
    except (ZoneInfoNotFoundError, ValueError):
        return datetime.now(UTC)


# --------------------------------------------------------------------------------------------------- patients


def patient_options() -> dict[str, str]:
    """Key and title of every patient that can be chosen: uploads of this tab first, then the demos."""
    uploads = {key: held.title for key, held in bed().patients.items() if not held.demo}
    return uploads | {f"demo:{name}": title for name, title in bed().demos.items()}


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
    bed().patients[key] = Held(case=case, title=bed().demos[name], demo=True)
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
    state.patients[key] = Held(
        case=demos.moved(case, timedelta(), now().tzinfo), title=f"{case.label} · uploaded file", demo=False
    )
    _take(key)
    state.upload_says = (True, f"{case.label}: {len(case.entries)} entries read from the file.")


def upload_key() -> str:
    """Key of the file chooser now on the screen."""
    return f"upload_{bed().uploads}"


def _take(key: str) -> None:
    state = bed()
    state.chosen, state.read, state.upload_says = key, None, None
    state.charted = ([Settings()] + [s for _, s in state.patients[key].case.entries_with_settings()])[-1]
    state.tried, state.effort_stops, state.earlier, state.refused = {}, False, [], {}
    st.session_state["patient"] = key
    _rewrite_fields()


# -------------------------------------------------------------------------------------------- trying a change


def charted() -> Settings:
    """The settings in force after the last entry of the patient in hand."""
    return bed().charted


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
    _try({name: getattr(charted(), name) if value is None else value})


def step_number(name: str, direction: int) -> None:
    """Callback of the − and + beside a number field."""
    _try({name: typed.stepped(in_use(name), direction, FIELDS[name])})


def choose_humidifier() -> None:
    """Callback of the humidifier; the field beside it takes the volume that the forecast will take.

    Going back to a humidifier that moves no volume takes away what the other one brought, and nothing else.
    """
    choice = st.session_state[field_key("humidifier")]
    choice = choice if choice in CHOICES["humidifier"] else charted().humidifier
    went, comes = _volume_with(in_use("humidifier")), _volume_with(choice)
    change: dict[str, object] = {"humidifier": choice}
    if comes is not None:
        change["apparatus_dead_space_ml"] = comes
    elif went is not None and went == in_use("apparatus_dead_space_ml"):
        change["apparatus_dead_space_ml"] = charted().apparatus_dead_space_ml
    _try(change)


def _volume_with(humidifier: str | None) -> float | None:
    """Apparatus dead space that the engine takes with this humidifier; None where it moves none."""
    with suppress(Impossible):  # charted settings that cannot be are told where the forecast would stand
        return settings_asked({"humidifier": humidifier}, charted()).apparatus_dead_space_ml
    return None


def asked() -> dict[str, object]:
    """The change to forecast: what is tried, and beside another humidifier the volume that the field shows.

    Without it the engine would move the volume of an exchanger even where a hand has typed the charted one.
    """
    change, volume = dict(bed().tried), in_use("apparatus_dead_space_ml")
    return change | (
        {"apparatus_dead_space_ml": volume} if "humidifier" in change and volume is not None else {}
    )


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


def _try(change: Mapping[str, object]) -> None:
    """One step: these values are used from here on; a value as charted is no change."""
    state, before = bed(), charted()
    if any(value != in_use(name) for name, value in change.items()):
        _remember()
    wanted = {**state.tried, **change}
    state.tried = {name: value for name, value in wanted.items() if value != getattr(before, name)}
    for name in change:
        state.refused.pop(name, None)
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


# ------------------------------------------------------------------------------------------------------ units


def choose_units() -> None:
    """Callback of the two unit choices."""
    chosen: MutableMapping[Any, Any] = st.session_state
    bed().units = Units(
        chosen["unit_gas"] or bed().units.gas, chosen["unit_haemoglobin"] or bed().units.haemoglobin
    )
