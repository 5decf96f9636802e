"""The server around the screens: what it serves beside them and what it may write down."""

import gc
import logging
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from importlib import import_module
from pathlib import Path
from typing import Any

import anyio.to_thread
import streamlit as st
from starlette.datastructures import MutableHeaders
from starlette.middleware import Middleware
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from dashboard import live
from dashboard.wording import SAFETY, colour_variables

ABOUT = f"**Forebreath** forecasts what a ventilator change will do to the next arterial gas.\n\n{SAFETY}"
_STYLES = Path(__file__).with_name("paper.css")

# The page may load from, and talk to, this server alone. Inline styles and blob scripts are how the screen
# library itself works.
_POLICY = (
    "default-src 'self'; script-src 'self' 'unsafe-inline' blob:; style-src 'self' 'unsafe-inline'; "
    "img-src 'self' data: blob:; font-src 'self' data:; connect-src 'self' ws: wss:; "
    "worker-src 'self' blob:; object-src 'none'; base-uri 'self'; frame-ancestors 'none'; form-action 'self'"
)
_HEADERS = {
    "Content-Security-Policy": _POLICY,
    "Referrer-Policy": "no-referrer",
    "X-Content-Type-Options": "nosniff",
}


def parts() -> dict[str, Any]:
    """What `st.App` is built from."""
    return {
        "routes": [live.script_route()],
        "middleware": [Middleware(_Headers)],
        "lifespan": _lifespan,
        "on_script_error": _calm,
    }


def dress() -> None:
    """Our own papers and inks."""
    st.html(f"<style>{colour_variables()}\n{_STYLES.read_text(encoding='utf-8')}</style>")


class _Headers:
    """Adds the headers to every answer."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        async def send_with_headers(message: Message) -> None:
            if message["type"] == "http.response.start":
                MutableHeaders(scope=message).update(_HEADERS)
            await send(message)

        await self.app(scope, receive, send_with_headers if scope["type"] == "http" else send)


@asynccontextmanager
async def _lifespan(app: st.App) -> AsyncIterator[dict[str, Any]]:
    logging.getLogger("streamlit.error_util").addFilter(without_values)
    await anyio.to_thread.run_sync(_warm)
    yield {}


def _warm() -> None:
    """Load everything before the first visitor, then take it out of the collector's sight.

    The screen library collects garbage after every run and would walk all loaded modules each time. Two of
    them it loads itself, at the first run.
    """
    from dashboard.views import bed  # noqa: F401  (imported for its imports)

    for late in ("pandas", "pyarrow"):
        import_module(late)

    gc.collect()
    gc.freeze()


def without_values(record: logging.LogRecord) -> bool:
    """An exception's text may hold a patient's values: keep its kind and place, drop its words."""
    if record.exc_info:
        kind, _, trace = record.exc_info
        place = ""
        while trace is not None:
            place = f"{Path(trace.tb_frame.f_code.co_filename).name}:{trace.tb_lineno}"
            trace = trace.tb_next
        record.exc_info = None
        record.exc_text = None
        record.msg, record.args = f"{kind.__name__ if kind else 'Error'} at {place}", ()
    return True


def _calm(error: Exception) -> bool:
    """What the screen says when something went wrong on our side."""
    st.error("Something went wrong in the program; nothing on this screen is to be used. Reload the page.")
    return True
