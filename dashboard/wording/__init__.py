"""How things are called, counted and coloured on the screen.

The engine speaks in full field names, fractions and mmHg; a person at the bed reads labels, per cent and the
unit of the house. Every label, unit, number of digits and colour is decided here and nowhere else.
"""

from dashboard.wording.colours import PALETTES, colour_variables
from dashboard.wording.sentences import sentence_text
from dashboard.wording.settings import (
    CHOICE_WORDS,
    FIELDS,
    SETTING_LABELS,
    Field,
    change_text,
    field_label,
    fields_to_try,
    setting_text,
    settings_text,
)
from dashboard.wording.times import (
    OLD_HOURS,
    age_text,
    clock_after,
    clock_text,
    span_text,
    zone_text,
)
from dashboard.wording.units import LIMIT_LABELS, QUANTITY_LABELS, Units, chance_text, percent_text

SAFETY = (
    "Estimates, not measurements. Local protocol and licensed practice come first. Not for emergencies. "
    "Not a certified medical device."
)

__all__ = [
    "CHOICE_WORDS",
    "FIELDS",
    "LIMIT_LABELS",
    "OLD_HOURS",
    "PALETTES",
    "QUANTITY_LABELS",
    "SAFETY",
    "SETTING_LABELS",
    "Field",
    "Units",
    "age_text",
    "chance_text",
    "change_text",
    "clock_after",
    "clock_text",
    "colour_variables",
    "field_label",
    "fields_to_try",
    "percent_text",
    "sentence_text",
    "setting_text",
    "settings_text",
    "span_text",
    "zone_text",
]
