OPENQASM 3.0; include "stdgates.inc";
qubit[3] q; bit[3] c;
h q; c[0] = measure q[0];
if (c[0]) {
  cx q[1], q[2]; c[1] = measure q[1];
  if (c[1]) { h q[2]; } else { ry(0.4) q[2]; cx q[2], q[0]; }
} else if (c[1]) { x q[2]; } else { cz q[1], q[2]; c[2] = measure q[2]; if (c == 4) { y q[1]; } }
