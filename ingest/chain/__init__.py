"""The way of a reading, pure: from decoded values to water, quality, tank, animals and alarms. It calls analysis and touches nothing."""
