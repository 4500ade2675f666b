"""Addresses beside the pages: for machines, not for people."""
