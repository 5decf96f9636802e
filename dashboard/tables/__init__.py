"""Engine results as small tables in HTML text, every value escaped, without the screen library."""
