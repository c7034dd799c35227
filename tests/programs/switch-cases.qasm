OPENQASM 3.0; include "stdgates.inc";
qubit[4] q; bit[2] c;
ry(1) q[0]; ry(2) q[1]; cx q[0], q[2]; c[0] = measure q[0]; c[1] = measure q[1];
switch (int[4](c)) {
  case 0, 3 { cx q[2], q[3]; h q[3]; }
  case 1 { cx q[3], q[1]; }
  default { rz(pi/8) q[2]; swap q[2], q[3]; }
}
cx q[2], q[3];
