"""Whatever a valid case holds, however odd, checks, estimates and limits answer and never raise."""

from dataclasses import fields
from datetime import UTC, datetime, timedelta
from math import isfinite

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.checks import checks_for
from engine.estimates import estimates_for
from engine.limits import limits_for, mechanics_of
from engine.record import (
    CHOICES,
    CONDITIONS,
    EVENTS,
    POSSIBLE,
    Baseline,
    BloodGas,
    Case,
    Entry,
    Impossible,
    Measured,
    Patient,
    Settings,
    Site,
)

START = datetime(2031, 3, 4, 7, 40, tzinfo=UTC)
CASES = 40  # enough to meet every branch over a few runs, short enough to run often


def some(kind: type) -> st.SearchStrategy[dict[str, object]]:
    """Any subset of the record's numbers and choices, each anywhere within what is possible."""
    drawn = {
        f.name: st.floats(*POSSIBLE[f.name]) if f.name in POSSIBLE else st.sampled_from(CHOICES[f.name])
        for f in fields(kind)
        if f.name in POSSIBLE or f.name in CHOICES
    }
    return st.fixed_dictionaries({}, optional=drawn)


REQUIRED_GAS = {n: st.floats(*POSSIBLE[n]) for n in ("ph", "paco2_mmhg", "pao2_mmhg", "hb_g_per_dl")}


@st.composite
def cases(draw: st.DrawFn) -> Case:
    """One to four entries half an hour apart; the first gives what a gas needs in force."""
    in_force = draw(st.fixed_dictionaries({n: st.floats(*POSSIBLE[n]) for n in ("fio2", "tidal_volume_ml")}))
    first = {"mode": draw(st.sampled_from(CHOICES["mode"])), "rate_per_min": draw(st.floats(1, 120))}
    entries = []
    for number in range(draw(st.integers(1, 4))):
        given_settings = draw(some(Settings)) | (in_force | first if number == 0 else {})
        gas = draw(st.none() | st.tuples(st.fixed_dictionaries(REQUIRED_GAS), some(BloodGas), st.booleans()))
        time = START + timedelta(minutes=30 * number)
        drawn_at = draw(st.none() | st.integers(-20, 20))
        made = None
        if gas is not None:
            corrected = {"temperature_corrected": gas[2] and "temperature_c" in gas[1]}
            drawn = {} if drawn_at is None else {"drawn_at": time + timedelta(minutes=drawn_at)}
            made = _or_none(gas[1] | gas[0] | corrected | drawn)
        entries.append(
            Entry(
                time=time,
                settings=Settings(**given_settings),
                measured=Measured(**draw(some(Measured))),
                gas=made,
                events=tuple(draw(st.lists(st.sampled_from(EVENTS), max_size=2))),
            )
        )
    patient = draw(some(Patient)) | {
        "conditions": tuple(draw(st.sets(st.sampled_from(CONDITIONS), max_size=3)))
    }
    baseline = Baseline(**draw(some(Baseline)))
    return Case(
        label="Bed 7",
        patient=Patient(**patient, baseline=baseline),
        site=Site(**draw(some(Site))),
        entries=tuple(entries),
    )


def _or_none(gas: dict[str, object]) -> BloodGas | None:
    """Dyshaemoglobins that add up to all of it are refused by the record itself."""
    try:
        return BloodGas(**gas)
    except Impossible:
        return None


def valid(strategy: st.SearchStrategy[Case]) -> st.SearchStrategy[Case | None]:
    """The case, or None where the record refuses it (a mode without a rate, say)."""

    @st.composite
    def tried(draw: st.DrawFn) -> Case | None:
        try:
            return draw(strategy)
        except Impossible:
            return None

    return tried()


@settings(max_examples=CASES, deadline=None)
@given(valid(cases()))
def test_checks_answer_any_valid_case(case: Case | None):
    if case is None:
        return
    for check in checks_for(case):
        assert check.says and check.source
        assert "nan" not in check.says.lower().split() and "None" not in check.says, check


@settings(max_examples=CASES, deadline=None)
@given(valid(cases()))
def test_estimates_answer_any_valid_case(case: Case | None):
    if case is None:
        return
    for number, entry in enumerate(case.entries):
        if entry.gas is None:
            continue
        for estimate in estimates_for(case, number):
            assert estimate.working and estimate.source
            assert estimate.value is None or isfinite(estimate.value), estimate


@settings(max_examples=CASES, deadline=None)
@given(valid(cases()), st.booleans())
def test_limits_answer_any_valid_case(case: Case | None, forecast: bool):
    if case is None:
        return
    *_, (_, in_force) = case.entries_with_settings()
    some_draws = np.linspace(0.5, 60.0, 50) if forecast else None
    rows = limits_for(
        case.patient,
        in_force,
        mechanics_of(case),
        ph=some_draws,
        total_rate_per_min=some_draws,
        effective_tidal_volume_ml=some_draws,
    )
    for row in rows:
        assert row.says and row.source
        assert row.value is None or isfinite(row.value), row
        assert row.ok is None or row.value is not None, row
