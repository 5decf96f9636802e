"""The engine's sentences in the unit of the house: every gas tension turned, nothing else touched."""

import re
from dataclasses import replace
from functools import cache
from pathlib import Path

import pytest

from dashboard.wording import Units, sentence_text
from engine.checks import checks_for
from engine.fit import fit
from engine.forecast import forecast
from engine.reading.case_file import read_case
from engine.units import mmhg_from_kpa

DEMOS = sorted((Path(__file__).parents[2] / "demo_patients").glob("*.json"))
FEW_DRAWS = 100  # the words of a forecast are looked at here, not its numbers
HALF_A_DIGIT_MMHG = float(mmhg_from_kpa(0.05)) + 1e-9  # kPa are shown to one decimal
NUMBER = r"\d+(?:\.\d+)?"
KPA = Units("kPa")


@cache
def said_of(path: Path) -> tuple[str, ...]:
    """Every check of a demo patient, and every limit, caution and recheck reason after two changes."""
    case = read_case(path)
    lung, in_force = fit(case, draws=FEW_DRAWS), list(case.entries_with_settings())[-1][1]
    changes = ({"peep_cmh2o": in_force.peep_cmh2o + 2}, {"rate_per_min": in_force.rate_per_min + 4})
    said = [text for check in checks_for(case) for text in (check.says, check.source)]
    for made in (forecast(lung, change) for change in changes):
        said += [*made.cautions, made.recheck.reason]
        said += [text for limit in made.limits for text in (limit.says, limit.source)]
    return tuple(said)


def of_a_gas(text: str) -> bool:
    return "mmHg" in text and "arometric" not in text


@pytest.mark.parametrize("path", DEMOS, ids=lambda path: path.stem)
def test_no_mmhg_of_a_gas_is_left(path):
    tensions = [text for text in said_of(path) if of_a_gas(text)]
    assert len(tensions) > 10
    for text in tensions:
        assert "mmHg" not in sentence_text(text, KPA), text


@pytest.mark.parametrize("path", DEMOS, ids=lambda path: path.stem)
def test_numbers_come_back_within_rounding_and_the_words_stay(path):
    for text in filter(of_a_gas, said_of(path)):
        shown = sentence_text(text, KPA)
        was, now = (re.findall(NUMBER, words) for words in (text, shown))
        turned = [(float(a), float(b)) for a, b in zip(was, now, strict=True) if a != b]
        assert turned, text
        for before_mmhg, after_kpa in turned:
            assert float(mmhg_from_kpa(after_kpa)) == pytest.approx(before_mmhg, abs=HALF_A_DIGIT_MMHG), text
        assert re.sub(NUMBER, "", shown).replace("kPa", "mmHg") == re.sub(NUMBER, "", text)


@pytest.mark.parametrize("path", DEMOS, ids=lambda path: path.stem)
def test_all_else_stays_as_it_is(path):
    for text in said_of(path):
        assert sentence_text(text, Units()) == text
        if not of_a_gas(text):
            assert sentence_text(text, KPA) == text


@pytest.mark.parametrize(
    ("says", "shown"),
    [
        ("a PaCO2 of 30 mmHg would mean a pH of 7.34.", "a PaCO2 of 4.0 kPa would mean a pH of 7.34."),
        ("PaCO2 target 28 to 34 mmHg; with pregnancy", "PaCO2 target 3.7 to 4.5 kPa; with pregnancy"),
        ("PaCO2 target open to 48 mmHg", "PaCO2 target open to 6.4 kPa"),
        ("with a failing heart up to 48 mmHg is usual", "with a failing heart up to 6.4 kPa is usual"),
        ("(P/F changed by -16 to 47 mmHg in half)", "(P/F changed by -2.1 to 6.3 kPa in half)"),
        ("usual 28-32 mmHg", "usual 3.7-4.3 kPa"),
        ("usual 28–32 mmHg, −15 mmHg", "usual 3.7–4.3 kPa, −2.0 kPa"),
        ("PaCO2 less end-tidal 0.9, SD 3.6 mmHg: Hess", "PaCO2 less end-tidal 0.1, SD 0.5 kPa: Hess"),
        ("at home about 58 mmHg: pH leads.", "at home about 7.7 kPa: pH leads."),
        ("1,200.5 mmHg", "160.1 kPa"),
        ("8-13 mL/mmHg at 70 kg", "8-13 mL/mmHg at 70 kg"),
        (
            "PaO2 75 mmHg. Barometric pressure 630 mmHg at 1500 m, where air has 634. PaO2 60 mmHg",
            "PaO2 10.0 kPa. Barometric pressure 630 mmHg at 1500 m, where air has 634. PaO2 8.0 kPa",
        ),
        (
            "Neither barometric pressure nor altitude is charted: 760 mmHg is assumed.",
            "Neither barometric pressure nor altitude is charted: 760 mmHg is assumed.",
        ),
        (
            "PaCO2 5.3 mmHg and PaO2 9 mmHg. Were they printed in kPa? They would be 40 and 68 mmHg.",
            "PaCO2 5.3 mmHg and PaO2 9 mmHg. Were they printed in kPa? They would be 40 and 68 mmHg.",
        ),
    ],
)  # fmt: skip
def test_every_way_to_say_a_tension(says, shown):
    assert sentence_text(says, KPA) == shown
    assert sentence_text(says, replace(KPA, gas="mmHg")) == says
