"""synthesis."""
