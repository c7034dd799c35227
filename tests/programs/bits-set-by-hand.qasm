OPENQASM 3.0; include "stdgates.inc";
qubit[3] q; bit[3] c = "101"; bit d;
if (c[0]) { h q[0]; } else { x q[0]; }
c[1] = measure q[0];
d = c[1] ^ c[2];
if (d) { x q[1]; c[0] = 0; }
c[2] = c[0] | d;
if (c == 7) { z q[2]; }
