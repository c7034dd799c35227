OPENQASM 3.0; include "stdgates.inc";
qubit[2] q; bit[4] c;
h q[0]; cx q[0], q[1]; c[0] = measure q[0];
reset q[0]; ry(0.6) q[0]; cx q[0], q[1]; barrier q; c[1] = measure q[0];
if (c[0]) { x q[0]; } cx q[1], q[0]; c[2] = measure q[0]; c[3] = measure q[1];
