"""Screens: what looks wrong in the arrivals of a survey."""
