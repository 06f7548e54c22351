"""Putting the stages together."""
