"""Fit + change -> Forecast: the next gas, the settled state, when to look, what is touched and not known."""

from engine.forecast.predict import Prediction, predict
from engine.forecast.result import LEVELS, QUANTITIES, Draws, Forecast, Recheck
from engine.forecast.tried import forecast, settings_asked

__all__ = [
    "LEVELS",
    "QUANTITIES",
    "Draws",
    "Forecast",
    "Prediction",
    "Recheck",
    "forecast",
    "predict",
    "settings_asked",
]
