"""Physiology in numbers: arrays of any shape in, arrays out. Knows no patient, no file, no screen."""
