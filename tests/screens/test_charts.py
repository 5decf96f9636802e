"""The PaO2-PaCO2 picture as a plain dict."""

import json
import re
from dataclasses import replace

import numpy as np
import pytest

from dashboard.charts.labels import free_sides
from dashboard.charts.plane import plane
from dashboard.tables.expected import in_words
from dashboard.wording import PALETTES, Units
from engine.physics.acid_base import ph_at_standard_base_excess, standard_base_excess_mmol_per_l
from engine.record import Case, Target
from engine.units import kpa_from_mmhg

FOUR_DIGITS = 1e-4  # coordinates are rounded to four decimals
WITHIN_A_STEP = 0.002  # pH: the right axis interpolates between 400 places


def trace(figure, name):
    (found,) = [part for part in figure["data"] if part["name"] == name]
    return found


def test_measured_gases_are_solid_dated_and_in_order(case, forecast_of, now):
    measured = trace(plane(case, forecast_of(), Units(), now), "measured")
    assert measured["x"] == [66, 71, 74] and measured["y"] == [62, 55, 53]  # the venous sample is no point
    assert [re.sub("<.*?>", "", text) for text in measured["text"]] == ["10:30", "12:30", "15:10"]
    assert measured["marker"]["symbol"] == "circle" and measured["marker"]["color"] == "@ink"
    assert measured["marker"]["size"][-1] > measured["marker"]["size"][0]


def test_forecast_is_two_labelled_bands_and_a_hollow_mark(case, forecast_of, now):
    forecast = forecast_of({"fio2": 0.8})
    figure = plane(case, forecast, Units(), now)
    for share in (0.5, 0.9):
        band = trace(figure, f"forecast {share:.0%}")
        pao2_mmhg, paco2_mmhg = forecast.region(share)
        np.testing.assert_allclose(band["x"], pao2_mmhg, atol=FOUR_DIGITS)
        np.testing.assert_allclose(band["y"], paco2_mmhg, atol=FOUR_DIGITS)
        assert band["fill"] == "toself" and band["fillcolor"].startswith("@forecast/")
        assert trace(figure, f"label {share:.0%}".replace("%", " %"))["text"] == [
            f"{share:.0%}".replace("%", " %")
        ]
    mark = trace(figure, "expected")
    assert mark["marker"]["symbol"] == "circle-open"
    assert mark["x"][0] == pytest.approx(forecast.next_gas["pao2_mmhg"].median, abs=FOUR_DIGITS)


def test_bands_lie_under_the_measured_gases(case, forecast_of, now):
    names = [part["name"] for part in plane(case, forecast_of(), Units(), now)["data"]]
    assert names.index("forecast 90%") < names.index("forecast 50%") < names.index("measured")


def test_target_is_a_labelled_outline_and_an_open_end_leaves_the_picture(case, forecast_of, now):
    figure = plane(case, forecast_of(), Units(), now)
    box = trace(figure, "target")
    assert min(box["x"]) == 60 and (min(box["y"]), max(box["y"])) == (38, 50)
    assert max(box["x"]) > 10 ** figure["layout"]["xaxis"]["range"][1]
    assert trace(figure, "label target")["text"] == ["target"]


def test_no_target_no_box(case, forecast_of, now):
    figure = plane(replace(case, target=None), forecast_of(), Units(), now)
    assert [part["name"] for part in figure["data"] if "target" in part["name"]] == []
    ph_only = plane(replace(case, target=Target(ph_low=7.3)), forecast_of(), Units(), now)
    assert [part["name"] for part in ph_only["data"] if "target" in part["name"]] == []


def test_kpa_moves_every_coordinate_and_says_so(case, forecast_of, now):
    figure = plane(case, forecast_of(), Units("kPa"), now)
    np.testing.assert_allclose(
        trace(figure, "measured")["y"], kpa_from_mmhg(np.array([62.0, 55.0, 53.0])), atol=FOUR_DIGITS
    )
    assert (
        "kPa" in figure["layout"]["xaxis"]["title"]["text"]
        and "kPa" in figure["layout"]["yaxis"]["title"]["text"]
    )
    low, high = (10**end for end in figure["layout"]["xaxis"]["range"])
    assert all(low < x < high for x in trace(figure, "measured")["x"])


def test_ph_marks_stand_where_the_last_gas_s_base_excess_puts_them(case, forecast_of, now):
    axis = plane(case, forecast_of(), Units(), now)["layout"]["yaxis2"]
    excess = standard_base_excess_mmol_per_l(7.31, 53.0)
    expected = ph_at_standard_base_excess(np.array(axis["tickvals"]), excess)
    np.testing.assert_allclose([float(text) for text in axis["ticktext"]], expected, atol=WITHIN_A_STEP)
    assert axis["matches"] == "y" and axis["side"] == "right"


def test_the_gas_itself_lies_at_its_own_ph(case, forecast_of, now):
    axis = plane(case, forecast_of(), Units(), now)["layout"]["yaxis2"]
    ph = np.interp(-53.0, -np.array(axis["tickvals"])[::-1], [float(text) for text in axis["ticktext"]][::-1])
    order = np.argsort(axis["tickvals"])
    ph = np.interp(53.0, np.array(axis["tickvals"])[order], np.array(axis["ticktext"], dtype=float)[order])
    assert ph == pytest.approx(7.31, abs=0.003)  # straight line between marks 0.05 apart


def test_every_point_and_band_lies_inside_the_picture(case, forecast_of, now):
    figure = plane(case, forecast_of({"rate_per_min": 12.0}), Units(), now)
    (x0, x1), (y0, y1) = (figure["layout"][axis]["range"] for axis in ("xaxis", "yaxis"))
    for name in ("measured", "expected", "forecast 90%"):
        part = trace(figure, name)
        assert all(x0 < np.log10(x) < x1 for x in part["x"]) and all(y0 < y < y1 for y in part["y"])


def test_after_a_change_of_peep_the_band_runs_across_and_says_why(case, forecast_of, now):
    figure = plane(case, forecast_of({"peep_cmh2o": 12.0}), Units(), now)
    band, (x0, x1) = trace(figure, "forecast 90%"), figure["layout"]["xaxis"]["range"]
    assert np.log10(min(band["x"])) < x0 and np.log10(max(band["x"])) > x1
    assert "expected" not in [part["name"] for part in figure["data"]]
    assert trace(figure, "label PaO₂ not forecast")["text"] == ["PaO₂ not forecast"]


def test_without_a_forecast_the_measured_gases_stand_alone(case, now):
    names = [part["name"] for part in plane(case, None, Units(), now)["data"]]
    assert "measured" in names and not [name for name in names if "forecast" in name or name == "expected"]
    assert "There is no forecast" in in_words(None, Units())


def test_an_empty_case_still_makes_a_picture(now):
    figure = plane(Case(label="Bed 1"), None, Units(), now)
    assert figure["data"] == [] and "yaxis2" not in figure["layout"]


def test_revision_changes_with_the_patient_and_the_units_only(case, forecast_of, now):
    def revision(case, units, change):
        return plane(case, forecast_of(change), units, now)["layout"]["uirevision"]

    same = revision(case, Units(), {})
    assert revision(case, Units(), {"fio2": 0.8}) == same
    assert (
        len({same, revision(case, Units("kPa"), {}), revision(replace(case, label="Bed 8"), Units(), {})})
        == 3
    )


def test_figures_are_plain_and_their_colours_are_of_the_palette(case, forecast_of, now):
    text = json.dumps(plane(case, forecast_of({"fio2": 0.8}), Units(), now), allow_nan=False)
    names = set(re.findall(r'"@([a-z_]+)', text))
    assert names and names <= set(PALETTES["light"])
    assert not re.findall(r"#[0-9a-f]{6}|rgb", text)


def test_words_for_those_who_do_not_see_the_picture(forecast_of):
    words = in_words(forecast_of({"peep_cmh2o": 12.0}), Units("kPa"))
    assert "PaO₂ not forecast" in words and "kPa, 90 %" in words and "pH 7.3" in words


def test_labels_keep_apart_and_inside():
    sides = free_sides([(0.5, 0.5), (0.5, 0.53), (0.01, 0.5), (0.99, 0.98)])
    assert sides[0] != sides[1]
    assert "left" not in sides[2] and "right" not in sides[3] and "top" not in sides[3]
    assert free_sides([]) == []
