"""driftline."""
