"""Tests mirror the three packages; tests/reference holds published tables, one file a source."""
