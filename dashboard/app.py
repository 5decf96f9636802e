"""Entry of the dashboard: ``streamlit run dashboard/app.py``.

Started by the server, this file is read twice over: once as a module, for ``app`` (the server with the route
that serves the plotting script and the headers that keep the page on this machine), then as the script of
every screen run.
"""

import streamlit as st

from dashboard import server
from dashboard.views import bed


def main() -> None:
    """Page set-up and navigation; only Bed so far."""
    st.set_page_config(
        page_title="Forebreath",
        page_icon="🌬️",
        layout="wide",
        menu_items={"About": server.ABOUT},
    )
    server.dress()
    st.navigation([st.Page(bed.show, title="Bed", url_path="bed", default=True)], position="hidden").run()


app = st.App(__file__, **server.parts())

if __name__ == "__main__":
    main()
