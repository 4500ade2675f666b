"""The euryhale command: one room a command."""
