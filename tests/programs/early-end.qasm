OPENQASM 3.0; include "stdgates.inc";
qubit[4] q; bit[2] c;
h q[0]; cx q[0], q[3]; cx q[0], q[2]; cx q[3], q[2]; c[0] = measure q[0];
if (c[0]) { cx q[1], q[2]; x q[3]; end; }
cx q[0], q[1]; cx q[1], q[3]; ry(0.3) q[2]; c[1] = measure q[2];
