"""Engine results as figures: plain dicts of ``data`` and ``layout``; nothing here knows the screen library."""
