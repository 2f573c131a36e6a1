"""Conversion factors: SI inside, the trade's units at the door."""

KM = 1000.0  # m
HOUR = 3600.0  # s
DAY = 86400.0  # s
