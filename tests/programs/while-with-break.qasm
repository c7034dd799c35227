OPENQASM 3.0; include "stdgates.inc";
qubit[3] q; bit c; int n = 0;
ry(2.1) q[2];
while (true) {
  h q[0]; cx q[0], q[1]; cx q[1], q[2]; cx q[0], q[2];
  c = measure q[0];
  n += 1;
  if (c || n > 3) { break; }
  ry(0.2) q[1];
  cx q[2], q[0];
}
