OPENQASM 3.0; include "stdgates.inc";
qubit[2] q; bit[4] c; uint[8] total = 7; int[8] i = -2; bool flag;
for int k in [0:3] { h q[0]; cx q[0], q[1]; c[k] = measure q[0]; }
total = (total << 1) ^ 5;
if (c[0] & c[1]) { total += 3; }
i = -i + 2;
flag = total % 3 == 1 || popcount(c) >= 2;
if (flag && !(c[3:-1:0] == "1010")) { ry(0.7) q[1]; i *= 3; }
if (i > 4) x q[0]; else y q[0];
