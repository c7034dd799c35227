OPENQASM 3.0; include "stdgates.inc";
qubit[3] q; bit c; int[8] ones = 0; bool even = true;
for int k in [1:4] {
  ry(k*0.5) q[0]; cx q[0], q[k % 2 + 1]; c = measure q[0];
  if (c) { ones += 1; even = !even; x q[0]; }
}
if (even) { h q[1]; } else { cz q[1], q[2]; }
if (ones > 2) { y q[2]; }
