"""What is known about one patient. Units are in the names; fractions are 0-1; unmeasured is ``None``.

A record refuses what cannot be (`Impossible`, a ``ValueError`` that names the field, the value and what was
expected); what is merely doubtful is accepted and raises a check later (`engine.checks`). One quantity has
one name everywhere, so one table, `POSSIBLE`, guards every record.
"""

from engine.record.case import Case
from engine.record.guard import CHOICES, CONDITIONS, EVENTS, POSSIBLE, Impossible
from engine.record.parts import Baseline, BloodGas, Entry, Measured, Patient, Settings, Site, Target

__all__ = [
    "CHOICES",
    "CONDITIONS",
    "EVENTS",
    "POSSIBLE",
    "Baseline",
    "BloodGas",
    "Case",
    "Entry",
    "Impossible",
    "Measured",
    "Patient",
    "Settings",
    "Site",
    "Target",
]
