"""What every test may lean on: brokers on free ports, a killer, a fake clock, seeded faults."""
