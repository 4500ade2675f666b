"""A simulated hatchery: weather, tanks, sensors with faults, publishing."""
