"""Engine results as figures: plain dicts of ``data`` and ``layout``, without the screen library."""
