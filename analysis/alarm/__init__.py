"""When a person has to know: conditions, the alarm state machine, how well the alarms work."""
