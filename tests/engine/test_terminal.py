"""The terminal: what each verb prints, its exit status, and one clear line for whatever is wrong."""

import csv
import json
import os
import subprocess
import sys
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path
from types import SimpleNamespace

import pytest

import engine.__main__ as terminal
from engine.__main__ import BAD_INPUT, DONE, LONGEST_MINUTES, NOTHING_TO_SAY, main
from engine.checks import Check
from engine.fit import NothingToSay
from engine.forecast import QUANTITIES
from engine.handover.forecast_text import CAUTION
from engine.lookback import Lookback
from engine.reading.case_file import text_from_case
from engine.record import BloodGas, Case, Entry, Impossible, Measured, Settings, Target

ROOT = Path(__file__).parents[2]
SHARED_CASES = ROOT / ".." / "shared" / "cases"
START = datetime(2031, 3, 4, 7, 40, tzinfo=UTC)
VOLUME = Settings(mode="volume", rate_per_min=18.0, tidal_volume_ml=380.0, fio2=0.5, peep_cmh2o=8.0)
GAS = BloodGas(ph=7.28, paco2_mmhg=57.0, pao2_mmhg=66.0, hb_g_per_dl=9.8)
CASE = Case(
    label="Bed 7",
    target=Target(ph_low=7.3, ph_high=7.45),
    entries=(
        Entry(time=START, settings=VOLUME),
        Entry(time=START + timedelta(minutes=45), measured=Measured(plateau_cmh2o=22.0), gas=GAS),
        Entry(time=START + timedelta(minutes=60), measured=Measured(spo2=0.93)),
    ),
)
EMPTY = Case(label="Bed 8")


@pytest.fixture
def bed7(tmp_path: Path) -> str:
    path = tmp_path / "bed7.json"
    path.write_text(text_from_case(CASE), encoding="utf-8")
    return str(path)


@pytest.fixture
def bed8(tmp_path: Path) -> str:
    path = tmp_path / "bed8.json"
    path.write_text(text_from_case(EMPTY), encoding="utf-8")
    return str(path)


def ended(capsys: pytest.CaptureFixture[str], status: int, *arguments: str) -> tuple[str, str]:
    """What was printed and what was said on stderr; checks the status, and that a refusal is one line."""
    assert main(arguments) == status
    out, err = capsys.readouterr()
    if status != DONE:
        assert err.count("\n") == 1
        assert err.strip().isprintable()
    assert "Traceback" not in out + err
    return out, err.strip()


def process(*arguments: str, **of_process: object) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "engine", *arguments]
    return subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False, **of_process)


# name=value


@pytest.mark.parametrize(
    ("words", "change"),
    [
        ([], {}),
        (["fio2=0.5"], {"fio2": 0.5}),
        (["fio2=0,5"], {"fio2": 0.5}),
        (["fio2=.5", "rate_per_min=24"], {"fio2": 0.5, "rate_per_min": 24.0}),
        (["mode=pressure", "airway=mask"], {"mode": "pressure", "airway": "mask"}),
        (["humidifier=heated", "peep_cmh2o=0"], {"humidifier": "heated", "peep_cmh2o": 0.0}),
    ],
)
def test_changes_are_read_with_point_or_comma_and_words(words, change):
    assert terminal.change_from_text(words) == change


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (["fio2"], '"fio2": expected name=value'),
        (["fio2="], '"fio2=": expected name=value'),
        (["=0.5"], '"": expected a setting'),
        (["fio2=0.5", "fio2=0.5"], "each name once"),
        (["fi02=0.5"], '"fi02": perhaps fio2; expected a setting, mode, rate_per_min'),
        (["spo2=0.9"], '"spo2": '),
        (
            ["fio2=40"],
            "fio2 = 40: per cent is never used in case files, 40 per cent is 0.4; expected a number",
        ),
        (["fio2=50%"], 'fio2 = "50%": expected a number from 0.21 to 1'),
        (["fio2=nan"], 'fio2 = "nan": expected a number'),
        (["fio2=1e-1"], 'fio2 = "1e-1": expected a number'),
        (["rate_per_min=-4"], "rate_per_min = -4: expected a number from 0 to 120"),
        (["rate_per_min=1.2.3"], 'rate_per_min = "1.2.3": expected a number'),
        (["rate_per_min=٣"], 'rate_per_min = "٣": expected a number'),
        (["tidal_volume_ml=0,42"], "L is never used in case files, 0.42 L is 420"),
        (["mode=Volume"], 'mode = "Volume": perhaps volume; expected one of volume, pressure'),
        (["mode=1"], 'mode = "1": expected one of volume'),
    ],
)
def test_a_change_that_cannot_be_is_refused_before_the_case_is_opened(capsys, words, says):
    out, err = ended(capsys, BAD_INPUT, "forecast", "no-such-case.json", *words)
    assert says in err
    assert out == ""


# Bad input of every verb


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        ((), "nothing asked; expected one of check, forecast, lookback"),
        (("predict",), "invalid choice: 'predict'"),
        (("check",), "required: CASE"),
        (("check", "bed7.json", "--odd"), "unrecognized arguments: --odd"),
        (("forecast",), "required: CASE"),
        (("forecast", "none.json"), "none.json: cannot be opened (No such file or directory)"),
        (("forecast", "."), ".: is a folder: expected a case file"),
        (
            ("forecast", "bed7.json", "--minutes", "soon"),
            'argument --minutes: "soon": expected a number from 0',
        ),
        (("forecast", "bed7.json", "--minutes", "-1"), 'argument --minutes: "-1": expected a number from 0'),
        (("forecast", "bed7.json", "--minutes", "1440,1"), "expected a number from 0 to 1440"),
        (("forecast", "bed7.json", "--minutes"), "argument --minutes: expected one argument"),
        (("forecast", "bed7.json", "--min", "5"), "unrecognized arguments: --min"),
        (("forecast", "bed7.json", "--effort", "grows"), "invalid choice: 'grows'"),
        (("forecast", "bed7.json", "--as", "heard"), "invalid choice: 'heard'"),
        (("forecast", "bed7.json", "--seed", "-1"), 'argument --seed: "-1": expected a whole number'),
        (("forecast", "bed7.json", "--seed", "1.5"), 'argument --seed: "1.5": expected a whole number'),
        (("forecast", "bed7.json", "--at", "09:00"), 'argument --at: "09:00": expected ISO 8601 with a zone'),
        (
            ("forecast", "bed7.json", "--at", "2031-03-04T08:39:59Z"),
            "expected no earlier than the last entry",
        ),
        (("lookback", "."), "required: --out"),
        (("lookback", "none", "--out", "x.csv"), "none: expected a folder of case files"),
        (("lookback", "bed7.json", "--out", "x.csv"), "bed7.json: expected a folder of case files"),
        (("lookback", ".", "--out", "."), "--out .: cannot be written"),
        (("lookback", ".", "--out", "none/x.csv"), "--out none/x.csv: cannot be written"),
        (("lookback", ".", "--out", "bed7.json/x.csv"), "--out bed7.json/x.csv: cannot be written"),
    ],
)
def test_bad_input_is_one_line_and_status_2(capsys, monkeypatch, bed7, arguments, says):
    monkeypatch.chdir(Path(bed7).parent)
    out, err = ended(capsys, BAD_INPUT, *arguments)
    assert says in err
    assert out == ""


def test_a_bad_case_is_refused_by_every_verb_that_reads_one(capsys, tmp_path):
    path = tmp_path / "bed9.json"
    path.write_text(text_from_case(CASE).replace('"fio2": 0.5', '"fio2": 50'), encoding="utf-8")
    for verb in ("check", "forecast"):
        out, err = ended(capsys, BAD_INPUT, verb, str(path))
        assert err.startswith(
            "bed9.json: entry 1 (2031-03-04T07:40:00Z): settings.fio2 = 50: per cent is never"
        )
        assert out == ""


def test_what_only_the_forecast_refuses_is_said_in_the_same_words(capsys, monkeypatch, bed7):
    def refuse(*_: object, **__: object) -> None:
        raise Impossible("fio2", 45.0, "a number from 0.21 to 1")

    monkeypatch.setattr(terminal, "fit", lambda *_, **__: None)
    monkeypatch.setattr(terminal, "forecast", refuse)
    _, err = ended(capsys, BAD_INPUT, "forecast", bed7)
    assert err == (
        "fio2 = 45: per cent is never used in case files, 45 per cent is 0.45; "
        "expected a number from 0.21 to 1"
    )


def test_a_fault_of_the_program_is_one_line_too(capsys, monkeypatch, bed7):
    def fail(*_: object, **__: object) -> None:
        raise ZeroDivisionError("division\nby zero")

    monkeypatch.setattr(terminal, "fit", fail)
    _, err = ended(capsys, BAD_INPUT, "forecast", bed7)
    assert err == r"a fault of the program, nothing was worked out (ZeroDivisionError: division\nby zero)"


def test_help_lists_the_verbs_and_each_verb_its_own(capsys):
    for arguments, says in (
        (["--help"], ("check", "forecast", "lookback")),
        (["forecast", "--help"], ("name=value", "--minutes", "--effort", "--as", "--seed", "--at", "--json")),
        (["lookback", "--help"], ("DIR", "--out", "--as", "--seed")),
    ):
        with pytest.raises(SystemExit) as left:
            main(arguments)
        assert left.value.code == 0
        printed = capsys.readouterr().out
        assert all(word in printed for word in says)


# check

ROWS = (
    Check(name="first", value=1.0, limit=2.0, ok=True, says="All is well.", source="s1"),
    Check(name="second", value=3.0, limit=2.0, ok=False, says="The gas of 08:25 reads 3.", source="s2"),
    Check(name="third", value=None, limit=2.0, ok=None, says="Unknown.", source="s3"),
)


def test_check_prints_what_is_doubtful_and_counts_the_rest(capsys, monkeypatch, bed7):
    monkeypatch.setattr(terminal, "checks_for", lambda case: ROWS)
    out, err = ended(capsys, DONE, "check", bed7)
    assert out.splitlines() == [
        "Bed 7 (bed7.json): 3 checks, 1 to look at",
        "- second: The gas of 08:25 reads 3. (s2)",
        "- Not answered, something is missing: third.",
    ]
    assert err == ""


def test_check_prints_every_row_as_json(capsys, monkeypatch, bed7):
    monkeypatch.setattr(terminal, "checks_for", lambda case: ROWS)
    out, _ = ended(capsys, DONE, "check", "--json", bed7)
    (found,) = json.loads(out)
    assert found["case"] == "bed7"
    assert [list(row) for row in found["checks"]] == [["name", "value", "limit", "ok", "says", "source"]] * 3
    assert [row["ok"] for row in found["checks"]] == [True, False, None]


def test_check_with_no_row_has_nothing_to_say(capsys, monkeypatch, bed8):
    monkeypatch.setattr(terminal, "checks_for", lambda case: ())
    assert main(["check", bed8]) == NOTHING_TO_SAY
    assert capsys.readouterr().out == "Bed 8 (bed8.json): 0 checks, 0 to look at\n"


def test_check_goes_on_after_a_bad_case(capsys, monkeypatch, bed7):
    monkeypatch.setattr(terminal, "checks_for", lambda case: ROWS)
    out, err = ended(capsys, BAD_INPUT, "check", "none.json", bed7, "--json")
    assert err.startswith("none.json: cannot be opened")
    assert [found["case"] for found in json.loads(out)] == ["bed7"]


def test_real_checks_print_in_words_and_as_json(capsys, bed7, bed8):
    out, err = ended(capsys, DONE, "check", bed7, bed8)
    assert "Bed 7 (bed7.json): " in out and "Bed 8 (bed8.json): " in out
    assert err == ""
    out, _ = ended(capsys, DONE, "check", bed7, "--json")
    assert json.loads(out)[0]["checks"]


@pytest.mark.skipif(not SHARED_CASES.is_dir(), reason="the shared case files are not beside this checkout")
def test_all_shared_cases_can_be_checked(capsys):
    paths = sorted(str(path) for path in SHARED_CASES.rglob("*.json"))
    out, err = ended(capsys, DONE, "check", "--json", *paths)
    assert [found["case"] for found in json.loads(out)] == [Path(path).stem for path in paths]
    assert err == ""


# forecast: what it passes on


@pytest.fixture
def asked(monkeypatch: pytest.MonkeyPatch) -> dict[str, object]:
    """What the terminal asks of fit and forecast; both are replaced, and the text is its title."""
    seen: dict[str, object] = {}

    def fit(case: Case, **of_fit: object) -> str:
        seen.update({f"fit {name}": value for name, value in of_fit.items()}, case=case)
        return "a fit"

    def forecast(fitted: object, change: object, **of_forecast: object) -> SimpleNamespace:
        assert fitted == "a fit"
        seen.update({f"forecast {name}": value for name, value in of_forecast.items()}, change=change)
        return SimpleNamespace(as_json=lambda: {"version": "0", "case": "its label"})

    monkeypatch.setattr(terminal, "fit", fit)
    monkeypatch.setattr(terminal, "forecast", forecast)
    monkeypatch.setattr(terminal, "forecast_text", lambda found, case, title: title)
    return seen


def test_forecast_by_default(capsys, asked, bed7):
    ended(capsys, DONE, "forecast", bed7)
    assert asked == {
        "case": CASE,
        "fit seed": 1,
        "fit read_as": "seen",
        "change": {},
        "forecast at": None,
        "forecast minutes": None,
        "forecast effort_stops": False,
        "forecast seed": 1,
    }


def test_forecast_with_everything_in_any_order(capsys, asked, bed7):
    late = "2031-03-04T10:00:00+01:00"
    line = f"--as done {bed7} fio2=0,6 --minutes 30,5 rate_per_min=24 --effort stops --at {late} --seed 7"
    out, _ = ended(capsys, DONE, "forecast", *line.split())
    assert asked == {
        "case": CASE,
        "fit seed": 7,
        "fit read_as": "done",
        "change": {"fio2": 0.6, "rate_per_min": 24.0},
        "forecast at": datetime(2031, 3, 4, 9, 0, tzinfo=UTC),
        "forecast minutes": 30.5,
        "forecast effort_stops": True,
        "forecast seed": 7,
    }
    assert out == "Bed 7 (bed7.json), if breathing effort stops\n"


@pytest.mark.parametrize("minutes", ["0", f"{LONGEST_MINUTES:g}"])
def test_minutes_up_to_both_ends(capsys, asked, bed7, minutes):
    ended(capsys, DONE, "forecast", bed7, "--minutes", minutes)
    assert asked["forecast minutes"] == float(minutes)


def test_now_may_be_the_last_entry_itself(capsys, asked, bed7):
    ended(capsys, DONE, "forecast", bed7, "--at", "2031-03-04T08:40:00Z")
    assert asked["forecast at"] == CASE.entries[-1].time


def test_forecast_as_json_names_the_case_by_its_file(capsys, asked, bed7):
    out, err = ended(capsys, DONE, "forecast", bed7, "--json")
    assert json.loads(out) == {"version": "0", "case": "bed7"}
    assert err == ""


def test_forecast_has_nothing_to_say_without_entries_or_gas(capsys, monkeypatch, bed7, bed8):
    out, err = ended(capsys, NOTHING_TO_SAY, "forecast", bed8)
    assert (out, err) == ("", "bed8.json: no entries, so nothing to forecast from")

    def refuse(*_: object, **__: object) -> None:
        raise NothingToSay("no arterial gas")

    monkeypatch.setattr(terminal, "fit", refuse)
    out, err = ended(capsys, NOTHING_TO_SAY, "forecast", bed7, "--json")
    assert (out, err) == ("", "no arterial gas")


def test_a_label_cannot_reach_the_terminal_as_anything_but_text(capsys, asked, tmp_path):
    path = tmp_path / "odd.json"
    path.write_text(text_from_case(replace(CASE, label="Bed\x1b[2J\n7")), encoding="utf-8")
    out, _ = ended(capsys, DONE, "forecast", str(path))
    assert out == "Bed\\x1b[2J\\n7 (odd.json)\n"


# lookback


@pytest.fixture
def replayed(monkeypatch: pytest.MonkeyPatch) -> dict[str, object]:
    """What the terminal asks of look-back, replaced by three rows and one case left out."""
    seen: dict[str, object] = {}

    def lookback(paths: list[Path], **of_lookback: object) -> Lookback:
        seen.update(of_lookback, paths=[path.name for path in paths])
        of_lookback["on_done"](1, 2)
        of_lookback["on_done"](2, 2)
        row = {
            "case": "bed7",
            "time": "t2",
            "made_at": "t1",
            "quantity": "ph",
            "measured": 7.3,
            "q05": 7.123456789,
        }
        rows = tuple(row | {"quantity": quantity} for quantity in ("ph", "paco2_mmhg", "pao2_mmhg"))
        return Lookback(rows=rows, left_out=(("bed8", "fewer than two usable gases"),))

    monkeypatch.setattr(terminal, "lookback", lookback)
    return seen


def test_lookback_writes_the_rows_and_names_what_it_left_out(capsys, replayed, bed7, bed8, tmp_path):
    folder, out_path = str(tmp_path), tmp_path / "out.csv"
    (tmp_path / "notes.txt").write_text("no case", encoding="utf-8")
    out, err = ended(capsys, DONE, "lookback", folder, "--out", str(out_path), "--as", "done", "--seed", "3")
    assert replayed["paths"] == ["bed7.json", "bed8.json"]
    assert (replayed["read_as"], replayed["seed"]) == ("done", 3)
    with out_path.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == ["case", "time", "made_at", "quantity", "measured", "q05"]
    assert [row["quantity"] for row in rows] == ["ph", "paco2_mmhg", "pao2_mmhg"]
    assert rows[0]["q05"] == "7.123456789"
    assert out.splitlines() == [
        "left out bed8: fewer than two usable gases",
        f"{out_path}: 3 forecasts of 1 gases in 1 cases",
        "2 cases looked at, 1 left out",
    ]
    assert "2 of 2 cases" in err


def test_lookback_reads_charts_as_seen_by_default(capsys, replayed, bed7, tmp_path):
    ended(capsys, DONE, "lookback", str(tmp_path), "--out", str(tmp_path / "out.csv"))
    assert (replayed["read_as"], replayed["seed"]) == ("seen", 1)


def test_lookback_has_nothing_to_say_of_an_empty_folder(capsys, tmp_path):
    out, err = ended(capsys, NOTHING_TO_SAY, "lookback", str(tmp_path), "--out", str(tmp_path / "out.csv"))
    assert (out, err) == ("", f"{tmp_path}: no case files (.json) in this folder")
    assert not (tmp_path / "out.csv").exists()


def test_lookback_writes_nothing_when_nothing_was_forecast(capsys, monkeypatch, bed8, tmp_path):
    nothing = Lookback(rows=(), left_out=(("bed8", "fewer than two usable gases"),))
    monkeypatch.setattr(terminal, "lookback", lambda *_, **__: nothing)
    out, err = ended(capsys, NOTHING_TO_SAY, "lookback", str(tmp_path), "--out", str(tmp_path / "out.csv"))
    assert out == "left out bed8: fewer than two usable gases\n"
    assert err.startswith("no gas with an earlier usable gas")
    assert not (tmp_path / "out.csv").exists()


def test_a_disk_that_fills_up_is_bad_input_too(capsys, replayed, bed7, tmp_path):
    if not Path("/dev/full").exists():
        pytest.skip("no device here that is always full")
    assert main(["lookback", str(tmp_path), "--out", "/dev/full"]) == BAD_INPUT
    assert "--out /dev/full: cannot be written (No space left on device)" in capsys.readouterr().err


# As a process of its own


def test_forecast_for_people_and_as_json(bed7):
    told = process("forecast", bed7, "rate_per_min=24", "fio2=0,6")
    assert (told.returncode, told.stderr) == (DONE, "")
    assert "rate 24 /min (was 18 /min)" in told.stdout
    assert told.stdout.rstrip().endswith(CAUTION)
    full = process("forecast", bed7, "rate_per_min=24", "fio2=0.6", "--json")
    assert (full.returncode, full.stderr) == (DONE, "")
    found = json.loads(full.stdout)
    assert list(found) == [
        *("version", "seed", "case", "from", "settings", "minutes", "now"),
        *QUANTITIES,
        *("settled", "in_target", "harm", "limits", "recheck", "cautions"),
    ]
    assert found["settings"]["rate_per_min"] == 24
    assert found["now"] == {"ph": 7.28, "paco2_mmhg": 57, "pao2_mmhg": 66, "sao2": None}
    for quantity in QUANTITIES:
        levels = [f"q{level:02d}" for level in range(5, 100, 5)]
        assert list(found[quantity]) == list(found["settled"][quantity]) == levels
        assert list(found[quantity].values()) == sorted(found[quantity].values())


def test_the_same_words_give_the_same_answer(bed7):
    line = ("forecast", bed7, "fio2=0.6", "--json", "--seed", "5")
    first = process(*line)
    assert first.returncode == DONE
    assert process(*line).stdout == first.stdout
    assert process(*line[:-1], "6").stdout != first.stdout


@pytest.mark.parametrize(
    "arguments", [("forecast", "none.json"), ("check", "."), ("lookback", "none", "--out", "x")]
)
def test_a_process_ends_with_status_2_and_one_line(arguments):
    found = process(*arguments)
    assert (found.returncode, found.stdout) == (BAD_INPUT, "")
    assert found.stderr.count("\n") == 1
    assert "expected" in found.stderr


def test_a_process_with_nothing_to_say_ends_with_status_1(bed8):
    found = process("forecast", bed8)
    assert (found.returncode, found.stdout) == (NOTHING_TO_SAY, "")
    assert found.stderr.count("\n") == 1


def test_a_terminal_that_lacks_a_letter_still_gets_an_answer(tmp_path):
    path = tmp_path / "zähe.json"
    path.write_text(text_from_case(replace(CASE, label="Bett Süd")), encoding="utf-8")
    found = process("check", str(path), env=os.environ | {"PYTHONIOENCODING": "ascii"})
    assert found.returncode == DONE
    assert found.stdout.startswith(r"Bett S\xfcd (z\xe4he.json): ")


@pytest.mark.skipif(os.name != "posix", reason="needs a shell with pipes")
def test_a_reader_that_leaves_early_gets_no_complaint(bed7):
    command = (
        f'{{ "{sys.executable}" -m engine check --json "{bed7}" "{bed7}"; echo "status $?" >&2; }} | true'
    )
    found = subprocess.run(["sh", "-c", command], cwd=ROOT, capture_output=True, text=True, check=False)
    assert found.stderr in ("status 0\n",)


@pytest.mark.slow
def test_lookback_of_two_cases_as_a_process(tmp_path):
    folder, out = tmp_path / "cases", tmp_path / "out.csv"
    folder.mkdir()
    second = Entry(
        time=START + timedelta(hours=3), settings=Settings(fio2=0.6), gas=replace(GAS, pao2_mmhg=80.0)
    )
    text = text_from_case(replace(CASE, entries=(*CASE.entries, second)))
    (folder / "bed7.json").write_text(text, encoding="utf-8")
    (folder / "bed8.json").write_text("{", encoding="utf-8")
    found = process("lookback", str(folder), "--out", str(out), "--as", "done")
    assert found.returncode == DONE
    assert "left out bed8: bed8.json: malformed JSON" in found.stdout
    with out.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert [row["quantity"] for row in rows] == ["paco2_mmhg", "pao2_mmhg", "ph"]
    assert [float(row["measured"]) for row in rows] == [57.0, 80.0, 7.28]
    levels = [f"q{level:02d}" for level in range(5, 100, 5)]
    assert list(rows[0]) == ["case", "time", "made_at", "quantity", "measured", *levels]
