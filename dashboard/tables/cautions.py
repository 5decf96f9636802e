"""What to bear in mind: the change as it was used, when to look again, cautions and doubtful input."""

from collections.abc import Sequence
from datetime import datetime
from html import escape

from dashboard.wording import Units, change_text, clock_after, clock_text, sentence_text, span_text
from engine.checks import Check
from engine.forecast import Forecast


def tried_line(forecast: Forecast, effort_stops: bool, now: datetime) -> str:
    """The values that the forecast was really made with, and what it takes for granted."""
    changes = [change_text(name, *ends) for name, ends in forecast.changed.items()]
    if effort_stops:
        changes.append("breathing effort stops")
    words = "; ".join(changes) if changes else "nothing; all as charted"
    return (
        f'<p class="fb-tried"><b>Tried:</b> {escape(words)}. '
        f"<span>Assumes that nothing else has changed since the gas at "
        f"{clock_text(forecast.made_from, now)}.</span></p>"
    )


def refused_line(says: str, used: str) -> str:
    """Why a typed number is not used, and the one that is."""
    return f'<div class="fb-refused" role="alert">{escape(says)} Still using {escape(used)}.</div>'


def note(says: str, *, good: bool = False) -> str:
    """What came of an upload, or why there is no forecast."""
    return f'<div class="fb-alert{" fb-good" if good else ""}" role="alert">{escape(says)}</div>'


def recheck_lines(forecast: Forecast, units: Units, now: datetime) -> str:
    """The two times to look again, counted from a change made now."""
    recheck, lines = forecast.recheck, []
    for minutes, what in (
        (recheck.early_minutes, "early look: right way, safe?"),
        (recheck.settled_minutes, "settled gas"),
    ):
        if minutes is not None:
            lines.append(
                f"<span><b>{clock_after(now, minutes)}</b>{what}<br>after {span_text(minutes)}</span>"
            )
    body = f'<div class="fb-times">{"".join(lines)}</div>' if lines else ""
    return (
        '<div class="fb-side fb-recheck">'
        f"<h3>Look again <small>if changed now, {clock_text(now, now)}</small></h3>"
        f"{body}<p>{escape(sentence_text(recheck.reason, units))}</p></div>"
    )


def cautions_list(forecast: Forecast, units: Units) -> str:
    """Every caution of the forecast, in its own order."""
    if not forecast.cautions:
        return ""
    lines = "".join(f"<li>{escape(sentence_text(text, units))}</li>" for text in forecast.cautions)
    return f'<div class="fb-side fb-cautions"><h3>Cautions</h3><ul>{lines}</ul></div>'


def checks_list(checks: Sequence[Check], units: Units) -> str:
    """The checks that are not passed, the latest of each kind first; the passed ones stay out of the way."""
    kinds: dict[str, list[Check]] = {}
    for check in reversed(checks):
        if check.ok is False:
            kinds.setdefault(check.name, []).append(check)
    if not kinds:
        return ""
    lines = "".join(f"<li>{_doubt(units, *found)}</li>" for found in kinds.values())
    return f'<div class="fb-side fb-checks"><h3>Doubtful in the chart</h3><ul>{lines}</ul></div>'


def _doubt(units: Units, latest: Check, *earlier: Check) -> str:
    before = f" {len(earlier)} more like it before." if earlier else ""
    says, source = (escape(sentence_text(text, units)) for text in (latest.says, latest.source))
    return f"{says}{before} <small>{source}</small>"
