"""Hooks for pytest; importing it costs pytest and the standard library only."""
