"""Shift report and tank record."""
