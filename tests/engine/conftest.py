"""Made patients: lungs whose numbers are known, the stays in which they would be seen, and short charts.

A gas of a known lung is its steady state (`engine.physics.exchange`), with no scatter unless a generator is
given; so an answer of fit or forecast can be held against the truth. The charts further down are for what
needs no lung, checks, estimates and limits: one ordinary patient each, of which a test changes what it asks
about.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import pytest

from engine.checks import Check, checks_for
from engine.estimates import Estimate, estimates_for
from engine.limits import Limit, Mechanics, limits_for
from engine.physics.exchange import Exchange, steady_state
from engine.record import BloodGas, Case, Entry, Measured, Patient, Settings, Site, Target

START = datetime(2031, 3, 4, 7, 0, tzinfo=UTC)
SCATTER_PACO2_CV, SCATTER_PAO2_CV, SCATTER_PH = 0.015, 0.025, 0.006  # half of what samples of a patient show

MAN_OF_175_CM = Patient(sex="male", height_cm=175, weight_kg=72)
VOLUME_CONTROL = Settings(
    mode="volume", rate_per_min=18, tidal_volume_ml=440, fio2=0.5, peep_cmh2o=8, inspiratory_time_s=1.0
)


@dataclass(frozen=True, kw_only=True)
class KnownLung:
    """A lung with no secrets; dead spaces and volumes as in `engine.lung`."""

    shunt: float = 0.20
    vq_log_sd: float = 0.9
    alveolar_dead_space: float = 0.30
    series_ml: float = 95.0
    vco2_ml_per_min: float = 205.0
    rq: float = 0.83
    cardiac_output_l_per_min: float = 5.5
    hb_g_per_dl: float = 11.0
    standard_base_excess: float = 0.0
    barometric_mmhg: float = 760.0

    def alveolar_l_per_min(self, settings: Settings, total_rate_per_min: float | None = None) -> float:
        """Ventilation past the series dead space, at the set rate or at the total one."""
        rate = total_rate_per_min or settings.rate_per_min
        return rate * (settings.tidal_volume_ml - self.series_ml) / 1000.0

    def exchange(self, settings: Settings, total_rate_per_min: float | None = None) -> Exchange:
        """The steady state under these settings."""
        return steady_state(
            shunt=self.shunt,
            vq_log_sd=self.vq_log_sd,
            alveolar_dead_space=self.alveolar_dead_space,
            alveolar_ventilation_l_per_min=self.alveolar_l_per_min(settings, total_rate_per_min),
            vco2_ml_per_min=self.vco2_ml_per_min,
            vo2_ml_per_min=self.vco2_ml_per_min / self.rq,
            cardiac_output_l_per_min=self.cardiac_output_l_per_min,
            hb_g_per_dl=self.hb_g_per_dl,
            standard_base_excess_mmol_per_l=self.standard_base_excess,
            fio2=settings.fio2,
            barometric_mmhg=self.barometric_mmhg,
        )

    def gas(
        self,
        settings: Settings,
        *,
        rng: np.random.Generator | None = None,
        total_rate_per_min: float | None = None,
        **given: Any,
    ) -> BloodGas:
        """The settled gas, scattered where there is a generator; ``given`` adds or replaces fields."""
        found = self.exchange(settings, total_rate_per_min)
        assert found.settled and not found.held, "this lung has no steady state"
        z = np.zeros(3) if rng is None else rng.standard_normal(3)
        printed: dict[str, Any] = {
            "ph": float(found.ph) + SCATTER_PH * z[0],
            "paco2_mmhg": float(found.paco2_mmhg) * np.exp(SCATTER_PACO2_CV * z[1]),
            "pao2_mmhg": float(found.pao2_mmhg) * np.exp(SCATTER_PAO2_CV * z[2]),
            "hb_g_per_dl": self.hb_g_per_dl,
        }
        return BloodGas(**printed | given)


@dataclass(frozen=True, kw_only=True)
class Stay:
    """A stay of one known lung: settings charted at a step, the settled gas of it at the step's end."""

    lung: KnownLung = KnownLung()
    patient: Patient = MAN_OF_175_CM
    first: Settings = VOLUME_CONTROL
    events: tuple[str, ...] = ("paralysis",)  # nothing but the ventilator breathes, so the truth is known
    measured: Measured | None = None
    total_rate_per_min: float | None = None
    hours: float = 3.0  # from step to step: long enough that every gas is settled

    def case(self, *steps: Settings, rng: np.random.Generator | None = None, **given: Any) -> Case:
        """The first settings and then each step, with one gas each; ``given`` adds fields to every gas."""
        entries, in_force = [], Settings()
        for number, step in enumerate((self.first, *steps)):
            in_force, begin = in_force.then(step), START + timedelta(hours=self.hours * number)
            entries.append(Entry(time=begin, settings=step, events=() if number else self.events))
            gas = self.lung.gas(in_force, rng=rng, total_rate_per_min=self.total_rate_per_min, **given)
            drawn = begin + timedelta(hours=self.hours) - timedelta(minutes=5)
            entries.append(Entry(time=drawn, measured=self.measured, gas=gas))
        site = Site(barometric_mmhg=self.lung.barometric_mmhg)
        return Case(label="Bed 7", patient=self.patient, site=site, entries=tuple(entries))


@pytest.fixture(scope="session")
def known_lung() -> Callable[..., KnownLung]:
    """`KnownLung`."""
    return KnownLung


@pytest.fixture(scope="session")
def known_stay() -> Callable[..., Stay]:
    """`Stay`."""
    return Stay


Fields = dict[str, object]
CHART_START = datetime(2031, 3, 4, 7, 40, tzinfo=UTC)

# A chart of two hours, for the checks

CHART_SETTINGS = {
    "mode": "volume",
    "rate_per_min": 16,
    "tidal_volume_ml": 430,
    "fio2": 0.4,
    "peep_cmh2o": 8,
    "inspiratory_time_s": 1.0,
}
CHART_GAS = {"ph": 7.36, "paco2_mmhg": 44, "pao2_mmhg": 82, "hb_g_per_dl": 12.5}
CHART_PATIENT = {"sex": "male", "height_cm": 178}


def entry(minutes: float, **parts: object) -> Entry:
    """An entry so many minutes after the start; settings, measured and gas as plain fields."""
    kinds = {"settings": Settings, "measured": Measured, "gas": BloodGas}
    made = {name: kinds[name](**value) if name in kinds else value for name, value in parts.items()}
    return Entry(time=CHART_START + timedelta(minutes=minutes), **made)


def chart(
    *between: Entry,
    settings: Fields | None = None,
    measured: Fields | None = None,
    gas: Fields | None = None,
    patient: Fields | None = None,
    site: Fields | None = None,
    target: Fields | None = None,
    **last: object,
) -> Case:
    """A case with settings at 07:40 and a gas with readings at 09:40, and entries between."""
    parts = {"gas": CHART_GAS | (gas or {})} | ({"measured": measured} if measured else {}) | last
    return Case(
        label="Bed 7",
        patient=Patient(**(CHART_PATIENT | (patient or {}))),
        site=Site(**({"barometric_mmhg": 752} if site is None else site)),
        target=Target(**target) if target else None,
        entries=(entry(0, settings=CHART_SETTINGS | (settings or {})), *between, entry(120, **parts)),
    )


def rows(case: Case, name: str) -> list[Check]:
    return [check for check in checks_for(case) if check.name == name]


def row(case: Case, name: str) -> Check:
    """The last row of that name."""
    found = rows(case, name)
    assert found, f"no row {name!r}"
    return found[-1]


def earlier_gas(**gas: object) -> Entry:
    return entry(60, gas=CHART_GAS | gas)


# One gas, for the estimates

ONE_GAS_SETTINGS: Fields = {
    "mode": "volume",
    "rate_per_min": 20,
    "tidal_volume_ml": 500,
    "fio2": 0.4,
    "peep_cmh2o": 10,
}
ONE_GAS: Fields = {"ph": 7.40, "paco2_mmhg": 40, "pao2_mmhg": 80, "hb_g_per_dl": 14}


def case_of(
    *,
    settings: Fields | None = None,
    measured: Fields | None = None,
    gas: Fields | None = None,
    patient: Fields | None = None,
    site: Fields | None = None,
    then: Entry | None = None,
) -> Case:
    """One entry with a gas, and perhaps another after it."""
    first = Entry(
        time=CHART_START,
        settings=Settings(**(ONE_GAS_SETTINGS | (settings or {}))),
        measured=Measured(**measured) if measured else None,
        gas=BloodGas(**(ONE_GAS | (gas or {}))),
    )
    return Case(
        label="Bed 7",
        patient=Patient(**(patient or {"sex": "male", "height_cm": 178})),
        site=Site(**(site or {"barometric_mmhg": 760})),
        entries=(first,) if then is None else (first, then),
    )


def find_estimate(name: str, number: int = 0, **parts: object) -> Estimate:
    case = case_of(**parts)
    return next(e for e in estimates_for(case, number) if e.name == name)


def estimated(name: str, **parts: object) -> float:
    found = find_estimate(name, **parts).value
    assert found is not None
    return found


# A chest and what is tried on it, for the limits

MAN_OF_70_KG = Patient(sex="male", height_cm=(60 + 20 / 2.3) * 2.54)
TRIED = Settings(
    mode="volume", rate_per_min=18, tidal_volume_ml=420, fio2=0.5, peep_cmh2o=10, inspiratory_time_s=1.0
)
CHEST = Mechanics(
    measured_at=CHART_START,
    mode="volume",
    tidal_volume_ml=420,
    plateau_cmh2o=24,
    peak_cmh2o=30,
    peep_cmh2o=10,
    set_peep_cmh2o=10,
    flow_l_per_min=25.2,  # 420 mL in a second
    inspiratory_time_s=1.0,
    passive=True,
    why="",
)


def find_limit(
    name: str,
    *,
    patient: Patient = MAN_OF_70_KG,
    tried: Settings = TRIED,
    chest: Mechanics = CHEST,
    **forecast: object,
) -> Limit:
    """The row of that name, the forecast quantities given by their own names."""
    rows = [row for row in limits_for(patient, tried, chest, **forecast) if row.name == name]
    assert len(rows) == 1, f"{len(rows)} rows {name!r}"
    return rows[0]


def with_condition(condition: str) -> dict[str, object]:
    return {"patient": replace(MAN_OF_70_KG, conditions=(condition,))}
