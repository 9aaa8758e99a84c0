"""Promised against seen: ledger, alarms, snapshots. Pure."""
