OPENQASM 3.0; include "stdgates.inc";
qubit[5] q; int k = 0; array[float, 3] turns = {0.1, 0.2, 0.4};
for int i in [0:3] { cx q[i], q[i + 1]; }
for float a in turns { rz(a) q[2]; }
for uint i in {4, 2, 0} { h q[i]; if (i == 2) continue; x q[i]; }
while (k < 5) { k += 2; ry(k*0.1) q[k % 5]; if (k == 4) { break; } }
for int i in [4:-2:0] { s q[i]; }
