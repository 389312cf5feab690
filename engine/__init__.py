"""The engine."""
