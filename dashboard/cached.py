"""Engine calls remembered for one browser session: the only caching there is.

Nothing of one session reaches another (``scope="session"``), and little is kept (``max_entries``). A case is
told from another by its full text, never by a sample of it.
"""

from collections.abc import Callable, Mapping
from datetime import datetime
from typing import Any

import streamlit as st

from engine import forecast as forecasting
from engine.checks import Check, checks_for
from engine.estimates import Estimate, estimates_for
from engine.fit import Fit, fit
from engine.forecast import Forecast
from engine.record import Case

_BY_TEXT: dict[str | type[Any], Callable[[Any], Any]] = {Case: repr}
_Change = tuple[tuple[str, object], ...]


@st.cache_resource(scope="session", max_entries=4, show_spinner=False, hash_funcs=_BY_TEXT)
def fitted(case: Case) -> Fit:
    """`engine.fit.fit` with the charted changes read as `seen`; some seconds for a long stay."""
    return fit(case)


@st.cache_resource(scope="session", max_entries=50, show_spinner=False, hash_funcs=_BY_TEXT)
def _forecast(case: Case, change: _Change, at: datetime, effort_stops: bool) -> Forecast:
    return forecasting.forecast(fitted(case), dict(change), at=at, effort_stops=effort_stops)


def forecast(case: Case, change: Mapping[str, object], *, at: datetime, effort_stops: bool) -> Forecast:
    """`engine.forecast.forecast` of the settled gas after ``change``, made ``at`` a time to the minute."""
    return _forecast(case, tuple(sorted(change.items())), at, effort_stops)


@st.cache_resource(scope="session", max_entries=8, show_spinner=False, hash_funcs=_BY_TEXT)
def checks(case: Case) -> tuple[Check, ...]:
    """`engine.checks.checks_for`."""
    return checks_for(case)


@st.cache_resource(scope="session", max_entries=8, show_spinner=False, hash_funcs=_BY_TEXT)
def estimates(case: Case) -> dict[int, tuple[Estimate, ...]]:
    """`engine.estimates.estimates_for` of every gas, by the number of its entry."""
    return {number: estimates_for(case, number) for number, entry in enumerate(case.entries) if entry.gas}
