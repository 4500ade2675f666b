"""Measured speed, as ratios within one run: `make bench`. Seconds are for the reader, ratios for the judgement."""
