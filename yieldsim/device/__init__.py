"""Absorbers: from band spectra and temperature to current and power."""
