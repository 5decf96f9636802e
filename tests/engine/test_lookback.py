"""Look-back: each gas as it was forecast when the last change before it was made, from nothing later."""

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest

import engine.lookback
from engine.fit import fit
from engine.forecast import LEVELS, forecast
from engine.lookback import SCORED, Lookback, lookback, rows_of
from engine.reading.case_file import text_from_case
from engine.record import BloodGas, Case, Entry, Measured, Patient, Settings, Site

START = datetime(2031, 3, 4, 7, 0, tzinfo=UTC)
MINUTE, HOUR = timedelta(minutes=1), timedelta(hours=1)
DRAWS = 200
FIRST = Settings(mode="volume", rate_per_min=18, tidal_volume_ml=440, fio2=0.5, peep_cmh2o=8)
GAS = BloodGas(ph=7.36, paco2_mmhg=44.0, pao2_mmhg=82.0, hb_g_per_dl=12.5)
LATER = BloodGas(ph=7.33, paco2_mmhg=48.0, pao2_mmhg=75.0, hb_g_per_dl=12.0)
QUANTILES = [f"q{round(100 * p):02d}" for p in LEVELS]
COLUMNS = ["case", "time", "made_at", "quantity", "measured", *QUANTILES]

Rows = list[dict[str, object]]


@pytest.fixture(autouse=True)
def few_draws(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(engine.lookback, "LOOKBACK_DRAWS", DRAWS)


def at(hours: float, **parts: object) -> Entry:
    return Entry(time=START + hours * HOUR, **parts)


def stay(*entries: Entry, passive: bool = True) -> Case:
    """Settings and a first gas at 07:00, then these entries."""
    first = at(0, settings=FIRST, gas=GAS, events=("paralysis",) if passive else ())
    patient = Patient(sex="male", height_cm=175, weight_kg=72)
    return Case(label="made", patient=patient, site=Site(barometric_mmhg=760), entries=(first, *entries))


def rows(case: Case, read_as: str = "done", seed: int = 1) -> Rows:
    return list(rows_of(case, "made", read_as=read_as, seed=seed))


def forecasts(found: Rows) -> list[list[object]]:
    """All of the rows but what was measured."""
    return [[row[name] for name in COLUMNS if name != "measured"] for row in found]


def clock(found: Rows) -> list[str]:
    return [str(row["made_at"])[11:16] for row in found[:: len(SCORED)]]


RATE = at(1, settings=Settings(rate_per_min=22))
OXYGEN = at(2, settings=Settings(fio2=0.7))
GAS_AT_4 = at(4, gas=LATER)


# What stands in a row


def test_columns_and_quantities():
    found = rows(stay(RATE, GAS_AT_4))
    assert [list(row) for row in found] == [COLUMNS] * 3
    assert [row["quantity"] for row in found] == ["paco2_mmhg", "pao2_mmhg", "ph"]
    assert [row["measured"] for row in found] == [48.0, 75.0, 7.33]
    assert {row["case"] for row in found} == {"made"}
    assert {row["time"] for row in found} == {"2031-03-04T11:00:00Z"}
    for row in found:
        values = [row[name] for name in QUANTILES]
        assert np.all(np.isfinite(values)) and np.all(np.diff(values) >= 0) and values[0] > 0


def test_every_usable_gas_but_the_first_has_its_rows():
    case = stay(RATE, GAS_AT_4, OXYGEN_LATE := at(5, settings=Settings(fio2=0.6)), at(7, gas=GAS))
    found = rows(case)
    assert len(found) == 2 * len(SCORED)
    assert clock(found) == ["08:00", "12:00"]
    assert OXYGEN_LATE.time.hour == 12


# Which change, and from what


def test_the_last_change_counts():
    assert clock(rows(stay(RATE, OXYGEN, GAS_AT_4))) == ["09:00"]


def test_first_values_and_repeats_are_no_changes():
    repeat = at(2, settings=Settings(rate_per_min=22, fio2=0.5))
    first_value = at(3, settings=Settings(inspiratory_time_s=1.0))
    assert clock(rows(stay(RATE, repeat, first_value, GAS_AT_4))) == ["08:00"]


def test_any_setting_counts_devices_too():
    device = at(2, settings=Settings(apparatus_dead_space_ml=55))
    humidifier = at(3, settings=Settings(humidifier="heated"))
    first = replace(FIRST, apparatus_dead_space_ml=0, humidifier="exchanger")
    case = stay(device, humidifier, GAS_AT_4)
    case = replace(case, entries=(replace(case.entries[0], settings=first), *case.entries[1:]))
    assert clock(rows(case)) == ["10:00"]


def test_without_a_change_the_forecast_is_of_the_earlier_gas_and_nothing_later():
    quiet = stay(GAS_AT_4)
    noisy = stay(at(2, measured=Measured(total_rate_per_min=30, spo2=0.8), events=("prone",)), GAS_AT_4)
    assert clock(rows(quiet)) == ["07:00"]
    assert rows(noisy) == rows(quiet)


def test_it_is_the_forecast_that_the_screen_would_have_shown():
    """At the moment of the change, from all entries before it, of the gas at its own time."""
    case = stay(RATE, at(1.75, gas=LATER))
    found = rows(case)
    fitted = fit(case.before(1), draws=DRAWS, read_as="done")
    shown = forecast(fitted, {"rate_per_min": 22.0}, at=RATE.time, minutes=45.0)
    for row in found:
        expected = list(shown.next_gas[row["quantity"]].as_json().values())
        np.testing.assert_allclose([row[name] for name in QUANTILES], expected, rtol=1e-9)


def test_a_gas_soon_after_the_change_is_forecast_as_unsettled():
    slowed = at(1, settings=Settings(rate_per_min=9))
    medians = [
        rows(stay(slowed, replace(GAS_AT_4, time=slowed.time + minutes * MINUTE)))[0]["q50"]
        for minutes in (5, 30, 180)
    ]
    assert GAS.paco2_mmhg < medians[0] < medians[1] < medians[2]
    assert medians[2] == pytest.approx(2 * GAS.paco2_mmhg, rel=0.1)  # half of the breaths


def test_the_time_of_drawing_counts_where_it_is_known():
    slowed = at(1, settings=Settings(rate_per_min=9))
    charted_late = at(4, gas=replace(LATER, drawn_at=slowed.time + 5 * MINUTE))
    on_time = Entry(time=slowed.time + 5 * MINUTE, gas=LATER)
    late, prompt = rows(stay(slowed, charted_late)), rows(stay(slowed, on_time))
    assert [row["q50"] for row in late] == [row["q50"] for row in prompt]
    assert late[0]["time"] == "2031-03-04T11:00:00Z"  # as in the file


# Strictly before


def alike(one: Case, other: Case, read_as: str = "done") -> bool:
    return forecasts(rows(one, read_as)) == forecasts(rows(other, read_as))


NEWS = Measured(
    total_rate_per_min=33,
    exhaled_tidal_volume_ml=250,
    spo2=0.7,
    cardiac_output_l_per_min=2.5,
    vco2_ml_per_min=400,
    svo2=0.4,
)


@pytest.mark.parametrize("read_as", ["seen", "done"])
def test_what_the_gas_reads_is_not_used(read_as):
    other = replace(LATER, ph=7.10, paco2_mmhg=80.0, pao2_mmhg=45.0, hb_g_per_dl=8.0, sao2=0.7, cohb=0.1)
    for change in ((RATE,), ()):
        assert alike(stay(*change, GAS_AT_4), stay(*change, replace(GAS_AT_4, gas=other)), read_as)


def test_what_is_measured_with_the_change_or_after_it_is_not_used():
    plain = stay(RATE, GAS_AT_4)
    for informed in (
        stay(replace(RATE, measured=NEWS), GAS_AT_4),
        stay(RATE, at(2, measured=NEWS, events=("suction",)), GAS_AT_4),
        stay(RATE, replace(GAS_AT_4, measured=NEWS, events=("bronchoscopy",))),
    ):
        assert alike(plain, informed)


def test_what_was_measured_before_the_change_is_used():
    before = at(0.5, measured=Measured(total_rate_per_min=33))
    assert not alike(stay(RATE, GAS_AT_4, passive=False), stay(before, RATE, GAS_AT_4, passive=False))


@pytest.mark.parametrize("passive", [True, False])
def test_a_change_in_the_gass_own_entry_is_settled_and_none_of_its_readings_used(passive):
    own = replace(GAS_AT_4, settings=Settings(rate_per_min=9))
    found = rows(stay(own, passive=passive))
    assert clock(found) == ["11:00"]
    if passive:
        assert found[0]["q50"] == pytest.approx(2 * GAS.paco2_mmhg, rel=0.1)  # all of it, not none
    others = (
        replace(own, measured=NEWS),
        replace(own, gas=replace(LATER, ph=7.2, paco2_mmhg=70.0, pao2_mmhg=50.0, hb_g_per_dl=9.0)),
        replace(own, measured=Measured(exhaled_tidal_volume_ml=600, total_rate_per_min=9)),
    )
    for other in others:
        assert alike(stay(own, passive=passive), stay(other, passive=passive))


def test_the_own_entrys_settings_are_used():
    slower, slowest = (
        rows(stay(replace(GAS_AT_4, settings=Settings(rate_per_min=rate))))[0]["q50"] for rate in (14, 9)
    )
    assert slowest > slower > GAS.paco2_mmhg


def test_later_gases_and_entries_do_not_reach_back():
    short = stay(RATE, GAS_AT_4)
    long = stay(RATE, GAS_AT_4, at(5, settings=Settings(fio2=0.9)), at(6, gas=GAS, measured=NEWS))
    assert rows(long)[: len(SCORED)] == rows(short)


def test_a_sample_drawn_before_the_last_change_is_forecast_under_the_settings_before():
    slowed = at(1, settings=Settings(rate_per_min=9))
    gas = at(1.5, gas=replace(LATER, drawn_at=slowed.time - 10 * MINUTE))
    assert rows(stay(slowed, gas))[0]["q50"] == pytest.approx(GAS.paco2_mmhg, rel=0.05)


def test_a_last_gas_that_nothing_explains_takes_no_row_away():
    impossible = at(1, settings=Settings(tidal_volume_ml=60))
    assert len(rows(stay(at(0.9, gas=GAS), impossible, GAS_AT_4))) >= len(SCORED)


# Gases that cannot be used


@pytest.mark.parametrize(
    "unusable",
    [
        [at(2, gas=replace(LATER, excluded="clotted"))],
        [at(2, gas=replace(LATER, specimen="venous"))],
        [
            at(1.5, events=("extracorporeal_start",)),
            at(2, gas=replace(LATER, pao2_mmhg=300.0)),
            at(2.5, events=("extracorporeal_stop",)),
        ],
    ],
)
def test_unusable_gases_are_neither_forecast_nor_learnt_from(unusable):
    found = rows(stay(*unusable, GAS_AT_4))
    assert {row["time"] for row in found} == {"2031-03-04T11:00:00Z"}
    assert [row["measured"] for row in found] == [48.0, 75.0, 7.33]
    assert clock(found) == ["07:00"]
    assert rows(stay(GAS_AT_4)) == found  # events and gases after the earlier gas, and no change: not used


def test_what_a_screen_would_not_forecast_is_forecast_here():
    """PEEP, and a breath not much above its dead space: rows of their own, none missing."""
    for change in (Settings(peep_cmh2o=14), Settings(tidal_volume_ml=140)):
        found = rows(stay(at(1, settings=change), GAS_AT_4))
        assert len(found) == len(SCORED)
        assert all(np.isfinite([row[q] for q in QUANTILES]).all() for row in found)
    plain, peep = (
        rows(stay(at(1, settings=change), GAS_AT_4))[1]
        for change in (Settings(inspiratory_time_s=1.1), Settings(peep_cmh2o=14))
    )
    assert peep["q95"] / peep["q05"] > 1.2 * plain["q95"] / plain["q05"]


# Seeing is not doing


@pytest.mark.parametrize(
    ("entries", "differ"),
    [
        ([GAS_AT_4], False),
        ([RATE, GAS_AT_4], False),
        ([at(1, settings=Settings(peep_cmh2o=12)), GAS_AT_4], False),
        ([OXYGEN, GAS_AT_4], True),
        ([replace(OXYGEN, change_reason="procedure"), GAS_AT_4], False),
        ([replace(OXYGEN, change_reason="prompted"), GAS_AT_4], False),
        ([replace(GAS_AT_4, settings=Settings(fio2=0.35))], True),
    ],
)
def test_seen_differs_from_done_only_after_a_charted_step_of_oxygen(entries, differ):
    seen, done = (rows(stay(*entries), read_as) for read_as in ("seen", "done"))
    assert (seen != done) == differ


@pytest.mark.parametrize(("fio2", "better"), [(0.35, True), (0.8, False)])
def test_oxygen_lowered_is_read_as_a_better_lung_and_raised_as_a_worse(fio2, better):
    step = at(1, settings=Settings(fio2=fio2))
    seen, done = (rows(stay(step, GAS_AT_4), read_as)[1]["q50"] for read_as in ("seen", "done"))
    assert (seen > done) == better


# Folders


@pytest.fixture
def folder(tmp_path: Path) -> list[Path]:
    """Four cases: two that can be used, one of a single gas, one that is no case."""
    texts = {
        "a": text_from_case(stay(RATE, GAS_AT_4)),
        "b": "{",
        "c": text_from_case(stay(OXYGEN, GAS_AT_4, at(6, gas=GAS))),
        "d": text_from_case(stay(RATE)),
        "e": text_from_case(replace(stay(), entries=())),
    }
    for name, text in texts.items():
        (tmp_path / f"{name}.json").write_text(text, encoding="utf-8")
    return [*sorted(tmp_path.glob("*.json")), tmp_path / "gone.json"]


def replayed(paths: list[Path], workers: int = 1, **more: object) -> Lookback:
    return lookback(paths, read_as="done", seed=1, workers=workers, **more)


def test_a_bad_case_never_stops_the_rest_and_is_named_with_the_reason(folder):
    found = replayed(folder)
    assert [row["case"] for row in found.rows] == ["a"] * 3 + ["c"] * 6
    reasons = dict(found.left_out)
    assert list(reasons) == ["b", "d", "e", "gone"]
    assert "malformed JSON" in reasons["b"]
    assert reasons["d"] == reasons["e"] == "fewer than two usable gases"
    assert "cannot be opened" in reasons["gone"]


def test_a_fault_in_one_case_is_named_too(folder, monkeypatch):
    real = engine.lookback.rows_of

    def faulty(case: Case, name: str, **asked: object):
        if name == "a":
            raise ZeroDivisionError("by zero")
        return real(case, name, **asked)

    monkeypatch.setattr(engine.lookback, "rows_of", faulty)
    found = replayed(folder)
    assert {row["case"] for row in found.rows} == {"c"}
    assert dict(found.left_out)["a"] == "a fault of the program: ZeroDivisionError: by zero"


def test_several_workers_find_what_one_finds(folder):
    done: list[tuple[int, int]] = []
    alone, together = replayed(folder), replayed(folder, workers=2, on_done=lambda k, n: done.append((k, n)))
    assert together == alone
    assert done == [(k, len(folder)) for k in range(1, len(folder) + 1)]


def test_the_same_seed_gives_the_same_rows_and_another_others():
    case = stay(RATE, GAS_AT_4)
    assert rows(case, seed=3) == rows(case, seed=3)
    assert forecasts(rows(case, seed=3)) != forecasts(rows(case, seed=4))


def test_a_seed_gives_each_case_the_same_rows_whatever_stands_beside_it(folder):
    alone = replayed([path for path in folder if path.stem == "c"])
    assert alone.rows == tuple(row for row in replayed(folder).rows if row["case"] == "c")
