"""qasm."""
