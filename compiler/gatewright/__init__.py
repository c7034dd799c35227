"""gatewright."""
