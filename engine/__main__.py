"""The terminal: ``python -m engine VERB``. Exit 0 done, 1 nothing to say, 2 bad input in one clear line.

Text for people by default, rounded as a clinician reads; ``--json`` in full. No traceback reaches a user;
under ``python -X dev`` a fault of the program itself shows its own.
"""

import argparse
import csv
import json
import os
import sys
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict
from datetime import datetime
from pathlib import Path
from re import fullmatch
from typing import Any, NoReturn

from engine.checks import Check, checks_for
from engine.fit import NothingToSay, fit
from engine.forecast import forecast
from engine.handover.forecast_text import forecast_text, item
from engine.lookback import lookback
from engine.reading.case_file import BadCase, read_case, text_from_time, time_from_text
from engine.reading.slips import likely_slip, nearest, one_line, quoted, shortened
from engine.record import CHOICES, Case, Impossible, Settings

DONE, NOTHING_TO_SAY, BAD_INPUT = 0, 1, 2
LONGEST_MINUTES = 1440.0  # a day: beyond it drift leaves nothing of a forecast


class BadInput(ValueError):
    """Something typed at the terminal that cannot be used."""


class _Parser(argparse.ArgumentParser):
    """Says what is wrong in one line and leaves the exit to `main`."""

    def error(self, message: str) -> NoReturn:
        raise BadInput(f"{message}; {self.prog} --help says what is expected")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return the exit status."""
    for stream in (sys.stdout, sys.stderr):
        if reconfigure := getattr(stream, "reconfigure", None):
            reconfigure(errors="backslashreplace")  # a terminal that lacks a letter still gets an answer
    try:
        status = _run(sys.argv[1:] if arguments is None else list(arguments))
        sys.stdout.flush()
        return status
    except BrokenPipeError:  # the reader, such as head, has seen enough
        with open(os.devnull, "w") as nowhere:
            os.dup2(nowhere.fileno(), sys.stdout.fileno())
        return DONE
    except NothingToSay as why:
        return _ended(NOTHING_TO_SAY, str(why))
    except (BadInput, BadCase) as why:
        return _ended(BAD_INPUT, str(why))
    except Impossible as why:
        return _ended(BAD_INPUT, _in_words(why))
    except KeyboardInterrupt:
        return _ended(BAD_INPUT, "interrupted")
    except Exception as why:  # the last door: a fault of the program, said in one line instead of a traceback
        if sys.flags.dev_mode:
            raise
        fault = f"{type(why).__name__}: {why}"
        return _ended(BAD_INPUT, f"a fault of the program, nothing was worked out ({fault})")


def _ended(status: int, says: str) -> int:
    print(one_line(says), file=sys.stderr)
    return status


def _in_words(why: Impossible) -> str:
    slip = likely_slip(why.field, why.value)
    return f"{why.field} = {quoted(why.value)}: {slip}{'; ' if slip else ''}expected {why.expected}"


def _run(arguments: list[str]) -> int:
    if not arguments:
        raise BadInput(f"nothing asked; expected one of {', '.join(_VERBS)}, or --help")
    says = "".join(f"\n{verb:<10} {run.__doc__}" for verb, (run, _) in _VERBS.items())
    top = _Parser(prog="python -m engine", allow_abbrev=False, formatter_class=argparse.RawTextHelpFormatter)
    top.add_argument("verb", metavar="VERB", choices=_VERBS, help=f"VERB --help says more{says}")
    top.add_argument("rest", nargs=argparse.REMAINDER, help=argparse.SUPPRESS)
    chosen = top.parse_args(arguments)
    run, describe = _VERBS[chosen.verb]
    parser = _Parser(prog=f"python -m engine {chosen.verb}", description=run.__doc__, allow_abbrev=False)
    describe(parser)
    return run(parser.parse_intermixed_args(chosen.rest))


def _describe_check(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("cases", metavar="CASE", nargs="+", type=Path, help="case files")
    parser.add_argument("--json", action="store_true", help="every check, in full")


def _check(args: argparse.Namespace) -> int:
    """List what is doubtful in case files; one that cannot be read is named, the others are still checked."""
    found: list[tuple[Path, Case]] = []
    refused = 0
    for path in args.cases:
        try:
            found.append((path, read_case(path)))
        except BadCase as why:
            refused = _ended(BAD_INPUT, str(why))
    rows = [(path, case, checks_for(case)) for path, case in found]
    if args.json:
        _print_json(
            [{"case": p.stem, "checks": [asdict(check) for check in checks]} for p, _, checks in rows]
        )
    elif rows:
        print("\n\n".join(_checks_text(path, case, checks) for path, case, checks in rows))
    return refused or (DONE if any(checks for _, _, checks in rows) else NOTHING_TO_SAY)


def _checks_text(path: Path, case: Case, checks: Sequence[Check]) -> str:
    doubtful = [check for check in checks if check.ok is False]
    unanswered = sorted({check.name for check in checks if check.ok is None})
    lines = [f"{_title(path, case)}: {len(checks)} checks, {len(doubtful)} to look at"]
    lines += [item(f"{check.name}: {check.says} ({check.source})") for check in doubtful]
    if unanswered:
        lines.append(item(f"Not answered, something is missing: {', '.join(unanswered)}."))
    return "\n".join(lines)


def _describe_forecast(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("case", metavar="CASE", type=Path, help="a case file")
    settings = "settings to try, such as fio2=0.5 rate_per_min=24"
    parser.add_argument("change", metavar="name=value", nargs="*", default=[], help=settings)
    parser.add_argument("--minutes", type=_minutes, help="from the change to the gas (default: settled)")
    parser.add_argument("--effort", choices=["stops"], help="forecast as if breathing effort stopped")
    parser.add_argument("--at", type=_time, metavar="TIME", help="now (default: the case's last entry)")
    parser.add_argument("--json", action="store_true", help="one object, in full")
    _describe_reading(parser)


def _describe_reading(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--as", dest="read_as", choices=["seen", "done"], default="seen", help=_AS)
    parser.add_argument("--seed", type=_seed, default=1, help="same seed, same answer (default 1)")


_AS = "charted changes answered the patient (seen, the default) or came from outside (done)"


def _forecast(args: argparse.Namespace) -> int:
    """Say what the next gas will probably read, untouched or after the change given by its settings."""
    change = change_from_text(args.change)
    case = read_case(args.case)
    if not case.entries:
        raise NothingToSay(f"{args.case.name}: no entries, so nothing to forecast from")
    last = case.entries[-1].time
    if args.at and args.at < last:
        raise BadInput(
            f"--at {text_from_time(args.at)}: expected no earlier than the last entry, {text_from_time(last)}"
        )
    fitted = fit(case, seed=args.seed, read_as=args.read_as)
    asked: dict[str, Any] = {"at": args.at, "minutes": args.minutes, "effort_stops": args.effort == "stops"}
    found = forecast(fitted, change, **asked, seed=args.seed)
    if args.json:
        _print_json(found.as_json() | {"case": args.case.stem})
    else:
        title = _title(args.case, case) + (", if breathing effort stops" if args.effort else "")
        print(forecast_text(found, case, title))
    return DONE


def change_from_text(words: Sequence[str]) -> dict[str, object]:
    """Settings from ``name=value`` words: numbers with point or decimal comma, words for modes and devices.

    >>> change_from_text(["fio2=0,5", "mode=pressure"])
    {'fio2': 0.5, 'mode': 'pressure'}
    """
    change: dict[str, object] = {}
    known = Settings.__dataclass_fields__
    for word in words:
        name, equals, text = word.partition("=")
        if not equals or not text or name in change:
            raise BadInput(f"{quoted(word)}: expected name=value, each name once, such as fio2=0.5")
        if name not in known:
            slip = nearest(name, known)
            raise BadInput(
                f"{quoted(name)}: {slip}{'; ' if slip else ''}expected a setting, {', '.join(known)}"
            )
        change[name] = text if name in CHOICES else _number(text) if _number(text) is not None else text
    Settings(**change)  # type: ignore[arg-type]  # the record itself refuses what does not fit
    return change


def _number(text: str) -> float | None:
    plain = fullmatch(r"[+-]?([0-9]+[.,]?[0-9]*|[.,][0-9]+)", text)
    return float(text.replace(",", ".")) if plain else None


def _minutes(text: str) -> float:
    minutes = _number(text)
    if minutes is None or not 0 <= minutes <= LONGEST_MINUTES:
        raise argparse.ArgumentTypeError(f"{quoted(text)}: expected a number from 0 to {LONGEST_MINUTES:g}")
    return minutes


def _seed(text: str) -> int:
    if not fullmatch(r"[0-9]{1,9}", text):
        raise argparse.ArgumentTypeError(f"{quoted(text)}: expected a whole number from 0 to 999999999")
    return int(text)


def _time(text: str) -> datetime:
    try:
        return time_from_text(text)
    except ValueError as why:
        raise argparse.ArgumentTypeError(str(why)) from None


def _print_json(value: object) -> None:
    print(json.dumps(value, ensure_ascii=False, indent=1, allow_nan=False))


def _describe_lookback(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("folder", metavar="DIR", type=Path, help="a folder of case files")
    parser.add_argument("--out", metavar="FILE.csv", type=Path, required=True, help="where the forecasts go")
    _describe_reading(parser)


def _title(path: Path, case: Case) -> str:
    return f"{shortened(one_line(case.label), 40)} ({one_line(path.name)})"


def _lookback(args: argparse.Namespace) -> int:
    """Forecast every gas of every case in a folder as it stood before it, beside what was measured."""
    if not args.folder.is_dir():
        raise BadInput(f"{args.folder}: expected a folder of case files")
    out: Path = args.out
    place = out if out.exists() else out.absolute().parent
    if out.is_dir() or not out.absolute().parent.is_dir() or not os.access(place, os.W_OK):
        raise BadInput(f"--out {out}: cannot be written; expected a file in a folder that can")
    paths = sorted(args.folder.glob("*.json"))
    if not paths:
        raise NothingToSay(f"{args.folder}: no case files (.json) in this folder")
    workers = os.cpu_count() or 1
    found = lookback(paths, read_as=args.read_as, seed=args.seed, workers=workers, on_done=_progress)
    for name, reason in found.left_out:
        print(one_line(f"left out {name}: {reason}"))
    if not found.rows:
        raise NothingToSay("no gas with an earlier usable gas: nothing was forecast and nothing written")
    _write_csv(out, found.rows)
    gases = {(row["case"], row["time"]) for row in found.rows}
    print(f"{out}: {len(found.rows)} forecasts of {len(gases)} gases in {len({c for c, _ in gases})} cases")
    print(f"{len(paths)} cases looked at, {len(found.left_out)} left out")
    return DONE


def _progress(done: int, total: int) -> None:
    """Cases done, on stderr: one line that counts on a terminal, a line each tenth elsewhere."""
    if sys.stderr.isatty():
        print(f"\r{done} of {total} cases", end="\n" if done == total else "", file=sys.stderr, flush=True)
    elif done == total or done % max(1, total // 10) == 0:
        print(f"{done} of {total} cases", file=sys.stderr, flush=True)


def _write_csv(out: Path, rows: Sequence[Mapping[str, object]]) -> None:
    try:
        with out.open("w", newline="", encoding="utf-8") as file:
            table = csv.DictWriter(file, fieldnames=list(rows[0]), lineterminator="\n")
            table.writeheader()
            table.writerows(rows)
    except OSError as why:
        raise BadInput(f"--out {out}: cannot be written ({why.strerror}); expected a file that can") from None


_Verb = tuple[Callable[[argparse.Namespace], int], Callable[[argparse.ArgumentParser], None]]
_VERBS: dict[str, _Verb] = {
    "check": (_check, _describe_check),
    "forecast": (_forecast, _describe_forecast),
    "lookback": (_lookback, _describe_lookback),
}

if __name__ == "__main__":
    sys.exit(main())
