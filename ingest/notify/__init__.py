"""From an alarm event to a person."""
