"""The parts of the dashboard's screens."""
