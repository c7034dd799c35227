// One round of a parity check with the ancilla measured, reset and used again.
OPENQASM 3.0;
include "stdgates.inc";

qubit[4] data;
qubit ancilla;
bit[2] parity;
bit[4] result;

h data[0];
cx data[0], data[1];
cx data[1], data[2];
cx data[2], data[3];
barrier data, ancilla;
cx data[0], ancilla;
cx data[1], ancilla;
parity[0] = measure ancilla;
reset ancilla;
cx data[2], ancilla;
cx data[3], ancilla;
parity[1] = measure ancilla;
result = measure data;
