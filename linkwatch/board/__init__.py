"""The terminal dashboard: it shows snapshots, and computes no figure of its own."""
