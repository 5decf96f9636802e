"""Forebreath's engine: from charted gases and settings to a forecast. Plain values in, plain values out."""

__version__ = "0.1.0"
