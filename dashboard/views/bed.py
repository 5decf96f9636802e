"""Bed: one patient's gases so far, and what the next one will probably read if something is changed."""

from contextlib import suppress
from datetime import datetime
from typing import NamedTuple

import streamlit as st
from streamlit.delta_generator import DeltaGenerator

from dashboard import cached, live, session
from dashboard.charts.plane import plane
from dashboard.session import Bed, Held
from dashboard.tables.cautions import (
    cautions_list,
    checks_list,
    note,
    recheck_lines,
    refused_line,
    tried_line,
)
from dashboard.tables.expected import expected_table, in_words
from dashboard.tables.gases import gases_table
from dashboard.tables.limits import limits_at_a_glance, limits_table, nearest_limit
from dashboard.tables.who import who_line
from dashboard.wording import (
    SAFETY,
    SETTING_LABELS,
    Field,
    field_label,
    fields_to_try,
    setting_text,
    zone_text,
)
from engine.fit import NothingToSay
from engine.forecast import Forecast
from engine.reading.case_file import text_from_case
from engine.record import CHOICES, Case, Impossible

PICTURE_HEIGHT_PX = 470


def show() -> None:
    """One patient, one change, one forecast."""
    state = session.bed()
    st.html(f'<div class="fb-safety">{SAFETY}</div>')
    with st.container(key="top", horizontal=True, vertical_alignment="center"):
        _who()
        _choices(state)
    held = state.in_hand
    if held is None:
        _upload_note(state)
        st.html(note("No patient in hand. Choose a demo patient or open a case file above.", good=True))
    elif session.is_unread():
        _first_look(state, held.case, session.moment())
        session.mark_read()
        st.rerun()
    else:
        _patient()


class _Rooms(NamedTuple):
    """Where things stand, whatever the order they are written in."""

    trial: DeltaGenerator
    busy: DeltaGenerator
    above: DeltaGenerator
    below: DeltaGenerator


def _rooms(*, cleared: bool) -> _Rooms:
    """The page below its top; for a fresh patient ``cleared`` of what stood there of the one before."""
    page = st.container()
    trial, result = page.columns([27, 100], gap="medium")
    above, below = (place.empty().container() if cleared else place.container() for place in (result, page))
    with trial, st.container(key="trial"):
        return _Rooms(st.container(), st.empty(), above, below)


@st.fragment
def _patient() -> None:
    """All that follows a change; the top of the page stays as it is.

    What is forecast is sent before the fields, so that the picture need not wait for them and no field shows
    a number before its forecast stands beside it.
    """
    state, now = session.bed(), session.moment()
    held = state.in_hand
    assert held is not None
    rooms = _rooms(cleared=False)
    with rooms.busy:
        answer = _forecast(state, held.case, now)
    forecast = answer if isinstance(answer, Forecast) else None
    with rooms.above:
        _upload_note(state)
        if isinstance(answer, str):
            st.html(note(answer))
        _result(state, held.case, forecast, now)
    with rooms.trial:
        _trial(state)
    with rooms.below:
        _gases(state, held.case, now)
        if forecast is not None:
            st.html('<h2 class="fb-heading">Limits</h2>' + limits_table(forecast.limits, state.units))


# -------------------------------------------------------------------------------------------- top of the page


@st.fragment(run_every="60s")
def _who() -> None:
    """Ages go on counting while the screen stands untouched."""
    held = session.bed().in_hand
    if held is not None:
        clock = session.now()
        st.html(who_line(held.case, held.demo, held.live(clock), clock))


def _choices(state: Bed) -> None:
    options = session.patient_options()
    st.selectbox(
        "Patient",
        list(options),
        format_func=lambda key: options.get(key, key),
        key="patient",
        on_change=session.choose_patient,
        label_visibility="collapsed",
        width=215,
    )
    with st.popover("File", key="file"):
        _file(state)
    with st.popover("Units", key="units"):
        _units(state)


def _file(state: Bed) -> None:
    st.file_uploader(
        "Open a case file",
        type=["json"],
        key=session.upload_key(),
        on_change=session.take_upload,
        max_upload_size=5,
    )
    if state.in_hand is not None:
        st.download_button(
            "Save this case as a file",
            data=_download(state.in_hand),
            file_name="case.json",
            mime="application/json",
            on_click="ignore",
        )


def _download(held: Held) -> str:
    return text_from_case(held.case)


def _units(state: Bed) -> None:
    for label, key, chosen, choices in (
        ("Gas tensions", "unit_gas", state.units.gas, ["mmHg", "kPa"]),
        ("Haemoglobin", "unit_haemoglobin", state.units.haemoglobin, ["g/dL", "g/L"]),
    ):
        st.segmented_control(
            label, choices, default=chosen, key=key, on_change=session.choose_units, required=True
        )


# ----------------------------------------------------------------------------------------------- try a change


def _trial(state: Bed) -> None:
    st.html('<h2 class="fb-heading">Try a change</h2>')
    for field in fields_to_try(session.charted()):
        _number(state, field)
    st.segmented_control(
        SETTING_LABELS["humidifier"],
        CHOICES["humidifier"],
        key=session.field_key("humidifier"),
        on_change=session.choose_humidifier,
    )
    st.toggle("If breathing effort stops", key="effort_stops", on_change=session.toggle_effort)
    with st.container(horizontal=True, key="steps"):
        st.button("Undo", key="undo", on_click=session.undo, disabled=not state.earlier)
        st.button(
            "As charted",
            key="as_charted",
            on_click=session.as_charted,
            disabled=not session.tries_something(),
        )


def _number(state: Bed, field: Field) -> None:
    with st.container(horizontal=True, vertical_alignment="bottom", key=f"field_{field.name}", gap="xxsmall"):
        st.text_input(
            field_label(field, state.tried, session.charted()),
            key=session.field_key(field.name),
            on_change=session.type_number,
            args=(field.name,),
        )
        for word, direction in (("less", -1), ("more", 1)):
            st.button(
                f"{field.label}: {word}",  # shown as − and + by the style sheet
                key=f"step_{word}_{field.name}",
                on_click=session.step_number,
                args=(field.name, direction),
            )
    if field.name in state.refused:
        used = setting_text(field.name, session.in_use(field.name))
        st.html(refused_line(state.refused[field.name], used))


# ------------------------------------------------------------------------------------------------- the result


def _first_look(state: Bed, case: Case, now: datetime) -> None:
    """What is measured stands at once; the lung behind it takes some seconds."""
    rooms, gases = _rooms(cleared=True), len(case.usable_gases())
    with rooms.trial:
        _trial(state)
    with rooms.below:
        _gases(state, case, now)
    words = f"Reading {gases} gases of this stay: some seconds at the first look at a patient."
    with rooms.above:
        _upload_note(state)
        with st.spinner(words, show_time=True), suppress(NothingToSay):  # said where a forecast would stand
            _picture(state, case, None, now)
            cached.fitted(case)


def _result(state: Bed, case: Case, forecast: Forecast | None, now: datetime) -> None:
    if forecast is not None:
        st.html(
            expected_table(case, forecast, state.units, now) + tried_line(forecast, state.effort_stops, now)
        )
    picture, beside = st.columns([60, 40], gap="medium")
    with picture:
        _picture(state, case, forecast, now)
    with beside:
        if forecast is not None:
            st.html(_limits_and_times(forecast, state, now))
        _show(checks_list(cached.checks(case), state.units))


def _limits_and_times(forecast: Forecast, state: Bed, now: datetime) -> str:
    return (
        nearest_limit(forecast.limits, state.units)
        + limits_at_a_glance(forecast.limits, state.units)
        + recheck_lines(forecast, state.units, now)
        + cautions_list(forecast, state.units)
    )


def _picture(state: Bed, case: Case, forecast: Forecast | None, now: datetime) -> None:
    live.draw(
        plane(case, forecast, state.units, now),
        key="plane",
        alt=in_words(forecast, state.units),
        height_px=PICTURE_HEIGHT_PX,
    )


def _gases(state: Bed, case: Case, now: datetime) -> None:
    table = gases_table(case, cached.estimates(case), state.units, now)
    st.html(
        '<h2 class="fb-heading">Gases so far</h2>'
        f'<p class="fb-note">Clock times in {zone_text(now.tzinfo, now)}.</p>{table}'
    )


def _upload_note(state: Bed) -> None:
    if state.upload_says is not None:
        good, says = state.upload_says
        st.html(note(says if good else f"File not opened, nothing changed. {says}", good=good))


def _show(text: str) -> None:
    if text:
        st.html(text)


def _forecast(state: Bed, case: Case, now: datetime) -> Forecast | str:
    """The forecast of what is being tried, or the reason for none."""
    try:
        with st.spinner("Working out the forecast."):
            return cached.forecast(case, session.asked(), at=now, effort_stops=state.effort_stops)
    except NothingToSay as why:
        return f"No forecast: {why}."
    except Impossible as why:
        label = SETTING_LABELS.get(why.field, why.field)
        value = setting_text(why.field, why.value)
        return f"No forecast of this change: {label} {value} cannot be; expected {why.expected}."
