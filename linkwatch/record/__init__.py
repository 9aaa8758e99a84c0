"""What outlives the run."""
