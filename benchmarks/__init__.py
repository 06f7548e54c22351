"""Measurements: cut quality, speed, scale. Ratios within one run on one machine; nothing here asserts a time."""
