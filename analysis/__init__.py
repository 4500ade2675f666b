"""Pure science: water, sensor, animal, alarm, acclimation. Time and random generators are arguments; no file, clock or network."""
