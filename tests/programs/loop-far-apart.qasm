OPENQASM 3.0; include "stdgates.inc";
qubit[9] q; bit c;
for int i in [0:7] { cx q[i], q[i + 1]; } cx q[0], q[8]; cx q[1], q[7];
c = measure q[4];
while (c) { cx q[0], q[8]; cx q[8], q[4]; cx q[1], q[6]; ry(0.3) q[4]; c = measure q[4]; }
cx q[3], q[5];
