"""Forwarding to the central InfluxDB, and reading back from it."""
