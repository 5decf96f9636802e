"""The live picture: a plain figure dict drawn in place, so that zoom survives and a change repaints quickly.

The stock chart element is mounted anew at every change of data and loses its zoom. This small component keeps
one node and hands each new figure to ``Plotly.react``. The plotting script is the one inside the installed
plotly package and is served from this machine (`script_route`); nothing is asked of any other.

Colours in a figure are names from `wording.PALETTES` ("@ink", "@forecast/0.2" with opacity): the browser
turns them into the light or dark value, also when the page changes its scheme while it stands open.
"""

import json
from importlib.metadata import version
from importlib.resources import as_file, files
from pathlib import Path
from typing import Any

import streamlit as st
from starlette.requests import Request
from starlette.responses import FileResponse
from starlette.routing import Route

from dashboard.wording import PALETTES

_HERE = Path(__file__).parent
_HTML = "<div class='fb-live' role='img' style='width:100%'></div>"


def script_path() -> str:
    """Where the browser finds the plotting script on this server; a new plotly makes a new address."""
    base = str(st.get_option("server.baseUrlPath") or "").strip("/")
    return (f"/{base}" if base else "") + f"/forebreath/plotly-{version('plotly')}.min.js"


def script_route() -> Route:
    """The route that serves it."""

    async def script(request: Request) -> FileResponse:
        with as_file(files("plotly") / "package_data" / "plotly.min.js") as path:
            return FileResponse(
                path,
                media_type="text/javascript",
                headers={"Cache-Control": "public, max-age=31536000, immutable"},
            )

    return Route(script_path(), script)


@st.cache_resource(show_spinner=False)
def _component() -> Any:
    """Registered once per server: the markup and the script beside this file."""
    return st.components.v2.component(
        "forebreath_live",
        html=_HTML,
        js=(_HERE / "live.js").read_text(encoding="utf-8"),
        isolate_styles=False,  # the plotting script writes its styles into the page's head
    )


def draw(figure: dict[str, Any], *, key: str, alt: str, height_px: int) -> None:
    """Show ``figure`` (``data`` and ``layout``) under ``key``; ``alt`` says in words what it shows.

    Zoom is kept as long as ``figure["layout"]["uirevision"]`` stays the same.
    """
    _component()(
        key=key,
        data={
            "figure": json.dumps(figure, allow_nan=False),
            "alt": alt,
            "height": height_px,
            "palettes": PALETTES,
            "script": script_path(),
        },
        height=height_px,
    )
