OPENQASM 3.0; include "stdgates.inc";
qubit[3] q; bit[2] c; uint[4] left = 4;
while (left != 0) {
  left -= 1;
  h q[0]; c[0] = measure q[0];
  if (c[0]) { cx q[0], q[2]; continue; }
  h q[1]; cx q[1], q[2]; c[1] = measure q[1];
}
