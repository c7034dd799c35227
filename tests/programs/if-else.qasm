OPENQASM 3.0; include "stdgates.inc";
qubit[4] q; bit[2] c;
ry(1.1) q[0]; cx q[0], q[3]; cx q[1], q[2]; cx q[0], q[2];
c[0] = measure q[0];
if (c[0]) { cx q[1], q[3]; cx q[0], q[3]; h q[2]; } else { cx q[2], q[0]; cx q[1], q[0]; cx q[3], q[0]; t q[3]; }
cx q[0], q[1]; c[1] = measure q[3];
if (!c[1]) x q[2];
