"""Where frames come from: the only way in."""
