"""Partial least squares: calibrate on known mixtures, validate, predict with limits. Numbers only."""
