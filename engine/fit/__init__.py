"""Case -> Fit: draws of one patient's lung after each usable gas, gas by gas."""

from engine.fit.sequence import Fit, NothingToSay, fit, fits_along

__all__ = ["Fit", "NothingToSay", "fit", "fits_along"]
