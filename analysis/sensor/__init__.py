"""Whether a sensor can be believed: compensation, calibration, drift, quality, health."""
