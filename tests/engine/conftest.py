"""Made patients: lungs whose numbers are known, and the stays in which they would be seen.

A gas here is the steady state of a known lung (`engine.physics.exchange`), with no scatter unless a generator
is given; so an answer of fit or forecast can be held against the truth.
"""

from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import pytest

from engine.physics.exchange import Exchange, steady_state
from engine.record import BloodGas, Case, Entry, Measured, Patient, Settings, Site

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
