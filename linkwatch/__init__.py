"""Counts the voice calls on a link and holds their exact cost against the admission budget."""

__version__ = "0.1.0"
