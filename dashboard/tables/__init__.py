"""Engine results as small tables in HTML text, every value escaped; nothing here knows the screen library."""
