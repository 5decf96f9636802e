"""The table of limits: where tried settings and their forecast stand to each, hard or soft, with its source.

Hard limits bind what may be proposed; soft ones are shown. What is set is judged as it is set; what is
forecast is judged at its median and shown with the share of draws inside.
"""

from collections.abc import Callable

from engine.estimates.chest import Mechanics, mechanics_of
from engine.limits import blood, chest, ventilator
from engine.limits.row import SURELY_KEPT, Limit, Uncertain, Verdict
from engine.limits.tried import Tried
from engine.record import Patient, Settings

__all__ = ["SURELY_KEPT", "TABLE", "Limit", "Mechanics", "Verdict", "limits_for", "mechanics_of"]

TABLE: tuple[Callable[[Tried], Limit | None], ...] = (
    ventilator.tidal_volume,
    chest.plateau,
    chest.driving_pressure,
    ventilator.set_rate,
    chest.expiratory_time,
    ventilator.fio2,
    ventilator.peep,
    chest.mechanical_power,
    blood.ph_floor,
    blood.ph_warning,
    blood.ph_ceiling,
    blood.pao2_floor,
    blood.pao2_ceiling,
    blood.brain_paco2,
    blood.brain_pao2,
    blood.right_heart_paco2,
    blood.pregnancy_paco2,
)
"""One function a limit, in the order they are shown; None where a limit does not concern this patient."""


def limits_for(
    patient: Patient,
    settings: Settings,
    mechanics: Mechanics,
    *,
    ph: Uncertain = None,
    pao2_mmhg: Uncertain = None,
    paco2_mmhg: Uncertain = None,
    total_rate_per_min: Uncertain = None,
    effective_tidal_volume_ml: Uncertain = None,
    seed: int = 1,
) -> tuple[Limit, ...]:
    """Where tried settings and their forecast stand to each limit.

    Parameters
    ----------
    patient : Patient
        Sex and height for tidal volume; conditions bring limits of their own.
    settings : Settings
        The full set after the change.
    mechanics : Mechanics
        The chest as last measured (`mechanics_of`), at the settings of then.
    ph, pao2_mmhg, paco2_mmhg : draws, number or None
        Forecast of the next gas; None where it is not forecast.
    total_rate_per_min, effective_tidal_volume_ml : draws, number or None
        Breaths as the forecast expects them; None: as set.
    seed : int
        Of the spread of pressures and time constants. Same seed, same answer.

    Returns
    -------
    limits : tuple of Limit
        In the order of `TABLE`. All draws must be of one length.
    """
    tried = Tried(
        patient=patient,
        settings=settings,
        mechanics=mechanics,
        ph=ph,
        pao2_mmhg=pao2_mmhg,
        paco2_mmhg=paco2_mmhg,
        total_rate_per_min=total_rate_per_min,
        effective_tidal_volume_ml=effective_tidal_volume_ml,
        seed=seed,
    )
    return tuple(row for limit in TABLE if (row := limit(tried)) is not None)
