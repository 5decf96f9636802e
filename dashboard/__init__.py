"""The screens: engine results as tables and pictures on this machine's browser."""
