"""Labels, digits, times and colours."""

import re
import tomllib
from datetime import timedelta
from itertools import product
from pathlib import Path

import pytest

from dashboard.charts.band import OPACITY, TARGET_OPACITY
from dashboard.wording import (
    FIELDS,
    PALETTES,
    SAFETY,
    Units,
    age_text,
    chance_text,
    change_text,
    clock_text,
    colour_variables,
    fields_to_try,
    percent_text,
    setting_text,
    span_text,
)
from engine.record import POSSIBLE, Settings

ROOT = Path(__file__).parents[2]

TEXT_CONTRAST, MARK_CONTRAST = 4.5, 3.0  # WCAG 2.2, success criteria 1.4.3 and 1.4.11
TEXTS, MARKS, PAPERS = ("ink", "quiet", "forecast", "target", "breach"), ("breach_mark",), ("paper", "wash")


def luminance(colour: str) -> float:
    """Relative luminance of an sRGB colour, WCAG 2.2."""
    channels = [int(colour[at : at + 2], 16) / 255 for at in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, other: str) -> float:
    light, dark = sorted((luminance(one), luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def laid_over(paper: str, colour: str, opacity: float) -> str:
    """The colour that a translucent one makes on paper."""
    pairs = [(int(paper[at : at + 2], 16), int(colour[at : at + 2], 16)) for at in (1, 3, 5)]
    return "#" + "".join(f"{round(below + (above - below) * opacity):02x}" for below, above in pairs)


def test_contrast_of_black_on_white_is_21():
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0, abs=1e-9)  # WCAG 2.2: the largest there is


@pytest.mark.parametrize(("scheme", "text", "paper"), list(product(PALETTES, TEXTS, PAPERS)))
def test_text_stands_out_from_every_paper(scheme, text, paper):
    assert contrast(PALETTES[scheme][text], PALETTES[scheme][paper]) >= TEXT_CONTRAST


@pytest.mark.parametrize(("scheme", "mark", "paper"), list(product(PALETTES, MARKS, PAPERS)))
def test_marks_stand_out_from_every_paper(scheme, mark, paper):
    assert contrast(PALETTES[scheme][mark], PALETTES[scheme][paper]) >= MARK_CONTRAST


@pytest.mark.parametrize(("scheme", "text"), list(product(PALETTES, ("ink", "quiet", "forecast"))))
def test_text_stands_out_from_the_tint_of_the_expected_row(scheme, text):
    palette = PALETTES[scheme]
    share = re.search(r"color-mix\(in srgb, var\(--fb-forecast\) (\d+)%, transparent\)", style_sheet())
    tint = laid_over(palette["paper"], palette["forecast"], int(share.group(1)) / 100)
    assert contrast(palette[text], tint) >= TEXT_CONTRAST


def under(scheme, *shares):
    """The ground inside the target where these forecast bands lie over each other."""
    palette = PALETTES[scheme]
    ground = laid_over(palette["paper"], palette["target"], TARGET_OPACITY)
    for share in shares:
        ground = laid_over(ground, palette["forecast"], OPACITY[share])
    return ground


@pytest.mark.parametrize("scheme", PALETTES)
def test_clock_times_stand_out_on_both_bands(scheme):
    assert contrast(PALETTES[scheme]["ink"], under(scheme, 0.9, 0.5)) >= TEXT_CONTRAST


@pytest.mark.parametrize(("scheme", "text"), list(product(PALETTES, ("forecast", "target"))))
def test_labels_of_band_and_target_stand_out_on_the_outer_band(scheme, text):
    assert contrast(PALETTES[scheme][text], under(scheme, 0.9)) >= TEXT_CONTRAST


def style_sheet() -> str:
    return (ROOT / "dashboard" / "paper.css").read_text("utf-8")


def test_style_sheet_uses_only_colours_of_the_palette():
    sheet = style_sheet()
    named = {name.replace("-", "_") for name in re.findall(r"var\(--fb-([a-z-]+)\)", sheet)}
    assert named and named <= set(PALETTES["light"]) == set(PALETTES["dark"])
    assert not re.findall(r"#[0-9a-fA-F]{3,8}\b|rgba?\(", sheet)
    assert all(f"--fb-{name}:" in colour_variables() for name in ("ink", "breach-mark"))


@pytest.mark.parametrize("scheme", PALETTES)
def test_theme_of_the_server_has_the_same_colours(scheme):
    theme = tomllib.loads((ROOT / ".streamlit" / "config.toml").read_text("utf-8"))["theme"][scheme]
    palette = PALETTES[scheme]
    assert theme == {
        "primaryColor": palette["forecast"],
        "backgroundColor": palette["paper"],
        "secondaryBackgroundColor": palette["wash"],
        "textColor": palette["ink"],
        "borderColor": palette["rule"],
    }


def test_safety_line_says_all_four_things():
    for words in (
        "not measurements",
        "Local protocol",
        "Not for emergencies",
        "Not a certified medical device",
    ):
        assert words in SAFETY


@pytest.mark.parametrize(
    ("units", "quantity", "value", "text"),
    [
        (Units(), "ph", 7.349, "7.35"),
        (Units(), "paco2_mmhg", 52.6, "53"),
        (Units("kPa"), "paco2_mmhg", 40.0, "5.3"),
        (Units("kPa"), "pao2_mmhg", 75.0, "10.0"),
        (Units(), "sao2", 0.934, "93"),
        (Units(), "sao2", None, "–"),
    ],
)
def test_quantities_as_a_clinician_reads_them(units, quantity, value, text):
    assert units.quantity_text(quantity, value) == text


def test_haemoglobin_in_the_unit_of_the_house():
    assert Units().haemoglobin_text(9.75) == "9.8"
    assert Units(haemoglobin="g/L").haemoglobin_text(9.8) == "98"


def test_a_chance_is_never_certain():
    assert [chance_text(p) for p in (0.0, 0.004, 0.5, 0.996, 1.0, None)] == [
        "under 1 %", "under 1 %", "50 %", "over 99 %", "over 99 %", "–",
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("fraction", "text"), [(0.5, "50"), (0.355, "35.5"), (1.0, "100"), (0.21, "21"), (None, "–")]
)
def test_per_cent_of_a_fraction(fraction, text):
    assert percent_text(fraction) == text


def test_changes_carry_their_units():
    assert change_text("fio2", 0.6, 0.5) == "FiO₂ 60 % → 50 %"
    assert change_text("humidifier", "exchanger", "heated") == "Humidifier exchanger → heated"
    assert change_text("apparatus_dead_space_ml", None, 55.0) == "Apparatus dead space not charted → 55 mL"
    assert setting_text("inspiratory_time_s", 0.95) == "0.95 s"


@pytest.mark.parametrize(
    ("settings", "driven", "timing"),
    [
        (Settings(mode="volume", inspiratory_time_s=1.0), "tidal_volume_ml", "inspiratory_time_s"),
        (Settings(mode="pressure", ie_ratio=0.5), "inspiratory_pressure_cmh2o", "ie_ratio"),
        (Settings(mode="support"), "support_pressure_cmh2o", None),
        (Settings(mode="other"), "tidal_volume_ml", "inspiratory_time_s"),
    ],
)
def test_fields_follow_the_mode(settings, driven, timing):
    names = [field.name for field in fields_to_try(settings)]
    assert {"rate_per_min", "fio2", "peep_cmh2o", "apparatus_dead_space_ml", driven} <= set(names)
    assert (
        (names[-1] == timing) if timing else ("inspiratory_time_s" not in names and "ie_ratio" not in names)
    )


def test_every_field_is_one_that_the_record_guards():
    assert set(FIELDS) <= set(POSSIBLE)
    assert FIELDS["fio2"].range_text == "21 to 100 %"


def test_ages_and_clock_times(now):
    assert age_text(now - timedelta(minutes=20), now) == "20 min ago"
    assert age_text(now - timedelta(minutes=125), now) == "2 h 05 min ago"
    assert age_text(now + timedelta(minutes=5), now) == "in 5 min"
    assert [span_text(m) for m in (0, 89, 90, 4320)] == ["0 min", "89 min", "1 h 30 min", "3 days"]
    assert clock_text(now - timedelta(hours=1), now) == "14:30"
    assert clock_text(now - timedelta(days=1), now) == "03 Mar 15:30"
