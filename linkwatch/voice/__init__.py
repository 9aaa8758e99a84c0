"""From frames to calls. Pure: no clock, no socket."""
