// Nine qubits in a superposition of all zeros and all ones.
OPENQASM 3.0;
include "stdgates.inc";

qubit[9] q;
bit[9] c;

h q[0];
cx q[0], q[1];
cx q[0], q[2];
cx q[1], q[3];
cx q[1], q[4];
cx q[2], q[5];
cx q[2], q[6];
cx q[3], q[7];
cx q[3], q[8];
c = measure q;
