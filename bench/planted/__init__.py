"""Invented surveys with known faults, made without tracing."""
