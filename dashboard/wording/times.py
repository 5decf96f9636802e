"""Clock times, ages and spans."""

from datetime import datetime, timedelta, tzinfo

OLD_HOURS = 8  # a last gas older than this is marked as old; design decision, no source


def clock_text(time: datetime, now: datetime) -> str:
    """Hours and minutes in the zone of ``now``; with the day where it is another."""
    local = time.astimezone(now.tzinfo)
    return f"{local:%H:%M}" if local.date() == now.date() else f"{local:%d %b %H:%M}"


def age_text(time: datetime, now: datetime) -> str:
    """How long ago, for example "20 min ago" or "3 h 05 min ago"; "in 5 min" where it lies ahead."""
    minutes = round((now - time) / timedelta(minutes=1))
    return f"in {span_text(-minutes)}" if minutes < 0 else f"{span_text(minutes)} ago"


def span_text(minutes: float) -> str:
    """A length of time: minutes up to 90, then hours, then days."""
    whole = round(minutes)
    if whole < 90:
        return f"{whole} min"
    hours, rest = divmod(whole, 60)
    return f"{hours} h {rest:02d} min" if hours < 48 else f"{hours // 24} days"


def clock_after(now: datetime, minutes: float) -> str:
    """The clock time ``minutes`` from ``now``."""
    return clock_text(now + timedelta(minutes=minutes), now)


def zone_text(zone: tzinfo | None, now: datetime) -> str:
    """The name of the zone that the screen's clock times stand in."""
    return getattr(zone, "key", None) or f"UTC{now:%z}".replace("UTC+0000", "UTC")
