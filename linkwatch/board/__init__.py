"""The terminal dashboard."""
