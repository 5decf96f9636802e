"""A bed, a quick stand-in for the engine's slow part, and the app as a hand meets it."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from streamlit.testing.v1 import AppTest

from dashboard import cached
from engine import forecast as forecasting
from engine.forecast import QUANTITIES, Draws, Forecast, Recheck
from engine.limits import Limit
from engine.record import BloodGas, Case, Entry, Measured, Patient, Settings, Target

ROOT = Path(__file__).parents[2]
NOW = datetime(2031, 3, 4, 15, 30, tzinfo=UTC)


def limit(name: str, value: float | None, end: float | str | None, ok: bool | None, **more: Any) -> Limit:
    """A limit row with as little typing as a test wants."""
    words = {"level": "hard", "unit": "", "probability": None, "says": f"{name} says", "source": "source2031"}
    return Limit(name=name, value=value, limit=end, ok=ok, **(words | more))


@pytest.fixture
def make_limit() -> Callable[..., Limit]:
    return limit


@pytest.fixture
def now() -> datetime:
    return NOW


@pytest.fixture
def case() -> Case:
    """Volume control, an exchanger, three usable gases and a venous one; the last 20 minutes before `NOW`."""
    start = NOW - timedelta(hours=6)
    settings = Settings(
        mode="volume", rate_per_min=18, tidal_volume_ml=350, fio2=0.6, peep_cmh2o=8, inspiratory_time_s=0.9,
        apparatus_dead_space_ml=55, humidifier="exchanger",
    )  # fmt: skip
    return Case(
        label="Bed 7",
        patient=Patient(sex="female", height_cm=164),
        target=Target(ph_low=7.30, ph_high=7.45, paco2_low_mmhg=38, paco2_high_mmhg=50, pao2_low_mmhg=60),
        entries=(
            Entry(time=start, settings=settings),
            Entry(time=start + timedelta(hours=1), gas=_gas(7.24, 62, 66, sao2=0.9)),
            Entry(time=start + timedelta(hours=2), settings=Settings(rate_per_min=22)),
            Entry(time=start + timedelta(hours=3), gas=_gas(7.29, 55, 71, sao2=0.93)),
            Entry(time=start + timedelta(hours=4), gas=_gas(7.25, 60, 40, specimen="venous")),
            Entry(
                time=NOW - timedelta(minutes=20),
                gas=_gas(7.31, 53, 74),
                measured=Measured(total_rate_per_min=22, plateau_cmh2o=26, minute_volume_l_per_min=7.4),
            ),
        ),
    )


def _gas(ph: float, paco2_mmhg: float, pao2_mmhg: float, **more: Any) -> BloodGas:
    return BloodGas(ph=ph, paco2_mmhg=paco2_mmhg, pao2_mmhg=pao2_mmhg, hb_g_per_dl=9.8, **more)


@dataclass(frozen=True)
class StandInFit:
    """Only the case: the stand-in forecast below needs no lung."""

    case: Case


def stand_in_forecast(
    fit: StandInFit, change: Mapping[str, Any], *, at: datetime, effort_stops: bool = False, **_: Any
) -> Forecast:
    """PaCO2 by set minute volume, PaO2 by FiO2, some scatter; PaO2 is not forecast after a change of PEEP."""
    case, number = fit.case, fit.case.usable_gases()[-1]
    gas, before = case.entries[number].gas, list(case.entries_with_settings())[-1][1]
    assert gas is not None
    after = replace(before, **change)
    scatter = np.random.default_rng(1).normal(size=(3, 400))
    ratio = _minute(before) / _minute(after) * (1.5 if effort_stops else 1.0)
    paco2_mmhg = gas.paco2_mmhg * ratio * np.exp(0.05 * scatter[0])
    oxygen = (after.fio2 or 1.0) / (before.fio2 or 1.0)
    pao2_mmhg = gas.pao2_mmhg * oxygen * np.exp(0.1 * scatter[1])
    draws: dict[str, Draws | None] = {
        "ph": Draws(gas.ph - 0.008 * (paco2_mmhg - gas.paco2_mmhg)),
        "paco2_mmhg": Draws(paco2_mmhg),
        "pao2_mmhg": Draws(pao2_mmhg),
        "sao2": Draws(pao2_mmhg**2.7 / (pao2_mmhg**2.7 + 27.0**2.7)),
    }
    changed = {n: (getattr(before, n), v) for n, v in change.items() if v != getattr(before, n)}
    cautions = ["It is assumed that nothing else has changed since the last gas."]
    if "peep_cmh2o" in changed:
        draws |= {"pao2_mmhg": None, "sao2": None}
        cautions.insert(0, "PaO2 is not forecast after a change of PEEP.")
    return Forecast(
        version="0", seed=1, label=case.label, made_from=case.entries[number].gas_time, at=at, settings=after,
        changed=changed, minutes=None, now={q: getattr(gas, q) for q in QUANTITIES}, next_gas=draws,
        settled=draws, in_target={"paco2": 0.7, "ph": 0.6, "pao2": None, "sao2": None, "all": 0.5},
        harm={"pao2_below_55": 0.0, "ph_below_7_15": 0.0, "ph_above_7_55": 0.0},
        limits=(limit("rate_per_min", after.rate_per_min, 35.0, True, unit="/min"),),
        recheck=Recheck(early_minutes=10.0, settled_minutes=55.0, reason="CO2 stores."),
        cautions=tuple(cautions),
    )  # fmt: skip


def _minute(settings: Settings) -> float:
    return (settings.rate_per_min or 1.0) * ((settings.tidal_volume_ml or 400.0) - 120.0)


@pytest.fixture
def forecast_of(case: Case) -> Callable[..., Forecast]:
    """The stand-in forecast of the bed above, for charts and tables."""
    return lambda change=(), **more: stand_in_forecast(StandInFit(case), dict(change), at=NOW, **more)


@pytest.fixture
def quick_engine(monkeypatch: pytest.MonkeyPatch) -> None:
    """Fit and forecast answer at once: for tests of what a hand can do, not of what is forecast."""
    monkeypatch.setattr(cached, "fit", StandInFit)
    monkeypatch.setattr(forecasting, "forecast", stand_in_forecast)


@pytest.fixture
def app() -> AppTest:
    """The whole dashboard at its first page, not yet run."""
    return AppTest.from_file(str(ROOT / "dashboard" / "app.py"), default_timeout=60)


@pytest.fixture
def html_of() -> Callable[[AppTest], str]:
    """All tables and words that the page writes itself, as one text."""
    return lambda app: "\n".join(
        element.proto.body for element in app.get("html") if not element.proto.body.startswith("<style")
    )
