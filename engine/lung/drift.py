"""How far a lung may have moved between two moments, and what a charted change says about it.

Each parameter moves by a normal step whose variance is ``jump^2 + rate^2 hours``, times the patient's
volatility and a heavy tail shared by all parameters of a step. The sizes come from gases with nothing
changed between them: in charted intensive-care stays PaCO2 then differs by 5.3 mmHg (SD), ln PaO2 by 0.28
and base excess by about 1 mmol/L over some three hours, in fully ventilated patients far less; hence two
kinds. In charted stays that difference is no larger after six hours than after one, so an active patient's
drift is nearly all jump.

Seeing is not doing: a CHARTED step of FiO2 is evidence, since oxygen is lowered because the lung got better.
Read as ``seen``, logit shunt moves with the step of FiO2 by `EVIDENCE`; read as ``done`` it does not move at
all.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from engine.lung.prior import INDEX, PARAMETERS, Belief
from engine.record import Entry, Settings

Array = NDArray[np.float64]

READ_AS = ("seen", "done")
TAIL = 5.0  # degrees of freedom of the heavy tail

# (jump per gas, rate per square-root hour) of a passive and of an active patient.
PASSIVE = {
    "logit_shunt": (0.03, 0.03),
    "ln_vq_log_sd": (0.02, 0.02),
    "logit_dead_space": (0.03, 0.03),
    "ln_series_ml": (0.0, 0.005),
    "apparatus_share": (0.0, 0.002),
    "ln_vco2": (0.022, 0.022),
    "rq": (0.003, 0.003),
    "ln_cardiac_output": (0.03, 0.03),
    "standard_base_excess": (0.2, 0.25),
    "logit_defence": (0.0, 0.02),
    "ln_volatility": (0.0, 0.02),
}
ACTIVE = PASSIVE | {
    "logit_shunt": (0.45, 0.04),
    "ln_vq_log_sd": (0.05, 0.04),
    "logit_dead_space": (0.08, 0.02),
    "ln_vco2": (0.08, 0.005),
    "ln_cardiac_output": (0.08, 0.04),
    "standard_base_excess": (1.2, 0.1),
    "logit_defence": (0.05, 0.05),
}
# Events widen the jump (SD on the parameter's own scale). Sizes: goligher2014 (PEEP: P/F change median 9.5,
# IQR -16 to 47), maggiore2003 (suction: 0.5-1.5 L of lung volume lost), bell2022 (prone: P/F +19 %); others
# common practice, no source.
EVENT: dict[str, dict[str, float]] = {
    "peep_change": {"logit_shunt": 0.5, "ln_vq_log_sd": 0.1, "logit_dead_space": 0.15},
    "recruitment": {"logit_shunt": 0.6},
    "prone": {"logit_shunt": 0.6, "ln_vq_log_sd": 0.2, "logit_dead_space": 0.2},
    "supine": {"logit_shunt": 0.5, "ln_vq_log_sd": 0.15, "logit_dead_space": 0.2},
    "suction": {"logit_shunt": 0.3, "logit_dead_space": 0.1},
    "disconnection": {"logit_shunt": 0.4},
    "bronchoscopy": {"logit_shunt": 0.5, "logit_dead_space": 0.2},
    "bronchodilator": {"ln_vq_log_sd": 0.15, "logit_dead_space": 0.15},
    "inhaled_vasodilator": {"logit_shunt": 0.3, "ln_vq_log_sd": 0.2},
    "drain": {"logit_shunt": 0.6},
    "reintubation": {"logit_shunt": 0.6, "ln_series_ml": 0.1, "logit_dead_space": 0.2},
    "transfusion": {"ln_cardiac_output": 0.1},
    "sedation_change": {"ln_vco2": 0.1, "logit_defence": 0.5},
    "paralysis": {"ln_vco2": 0.1, "logit_shunt": 0.2},
    "paralysis_end": {"ln_vco2": 0.1, "logit_shunt": 0.2},
    "bicarbonate": {"standard_base_excess": 4.0},
    "dialysis": {"standard_base_excess": 4.0},
    "transport": {"logit_shunt": 0.3, "ln_vco2": 0.1},
}
FIO2_ONE = {"logit_shunt": 0.3}  # absorption: aboab2006, pure oxygen at low PEEP cut P/F from 196 to 153
EVIDENCE, EVIDENCE_SD = 1.0, 0.7  # of logit shunt per 1.0 of FiO2 charted


@dataclass(frozen=True, slots=True, eq=False)
class Drift:
    """One step's shift and SD, each (draws, parameters)."""

    shift: Array
    sd: Array


def drift_between(
    belief: Belief,
    entries: tuple[Entry, ...],
    before: Settings,
    hours: float,
    tail: Array,
    *,
    read_as: str,
) -> Drift:
    """How the lung may move over ``hours`` in which ``entries`` were charted.

    Parameters
    ----------
    belief : Belief
        Draws at the start.
    entries : tuple of Entry
        What was charted since, the entry of the next gas included.
    before : Settings
        In force at the start.
    hours : float
        Length of the step, >= 0.
    tail : ndarray (draws,)
        Heavy-tailed scale of this step, see `heavy_tail`.
    read_as : str
        ``seen``: charted changes are evidence. ``done``: they are not.
    """
    spread = {True: _spread(ACTIVE, hours), False: _spread(PASSIVE, hours)}
    variance = np.where(belief.active[:, None], spread[True] ** 2, spread[False] ** 2)
    variance *= np.exp(2.0 * np.clip(belief.of("ln_volatility"), -2.0, 2.0))[:, None] * tail[:, None] ** 2
    shift, in_force = np.zeros_like(belief.values), before
    for entry in entries:
        after = in_force.then(entry.settings)
        for widened in widened_by(in_force, after, entry.events):
            for name, sd in widened.items():
                variance[:, INDEX[name]] += sd**2
        step = charted_fio2_step(in_force, after, entry)
        if read_as == "seen" and step:
            shift[:, INDEX["logit_shunt"]] += EVIDENCE * step
            variance[:, INDEX["logit_shunt"]] += (EVIDENCE_SD * step) ** 2
        in_force = after
    return Drift(shift, np.sqrt(variance))


def _spread(sizes: dict[str, tuple[float, float]], hours: float) -> Array:
    return np.array([np.hypot(sizes[n][0], sizes[n][1] * np.sqrt(hours)) for n in PARAMETERS])


def widened_by(before: Settings, after: Settings, events: tuple[str, ...]) -> list[dict[str, float]]:
    """What an entry's events and settings widen; a changed PEEP counts once, charted as event or not."""
    changed = before.differing(after)
    named = [e for e in events if e != "peep_change"]
    if "peep_cmh2o" in changed or "peep_change" in events:
        named.append("peep_change")
    widened = [EVENT[e] for e in named if e in EVENT]
    if "fio2" in changed and after.fio2 == 1.0:
        widened.append(FIO2_ONE)
    return widened


def charted_fio2_step(before: Settings, after: Settings, entry: Entry) -> float:
    """The step of FiO2 that is news of the lung: made for the patient, not for a procedure or a forecast."""
    if before.fio2 is None or after.fio2 is None or entry.change_reason in ("procedure", "prompted"):
        return 0.0
    return after.fio2 - before.fio2


def heavy_tail(rng: np.random.Generator, draws: int) -> Array:
    """Scales that turn normal steps into steps of Student's t with `TAIL` degrees of freedom."""
    return np.sqrt(TAIL / rng.chisquare(TAIL, draws))
