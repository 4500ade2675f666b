"""Codes and numbers to sentences, for screen, mail and terminal alike."""
