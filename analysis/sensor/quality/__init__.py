"""Can this reading be believed? Real-time quality tests after the QARTOD manual, for all sensors at once."""
