OPENQASM 3.0; include "stdgates.inc";
qubit[2] q; bit[2] c; bit[3] unused;
h q[0]; c[1] = measure q[0];
if (unused == 0) { x q[1]; }
if (c[1] == true) { z q[1]; }
c[0] = measure q[1];
