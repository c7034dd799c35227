"""mapping."""
