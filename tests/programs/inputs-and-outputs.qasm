OPENQASM 3.0; include "stdgates.inc";
input angle[32] theta; input float[64] rate;
output bit[2] c;
extern correction(bit[2]) -> float[64];
qubit[3] q;
gate sweep(a, b) x, y { rx(a) x; ctrl @ rz(2*b + pi/8) x, y; inv @ ry(a - b) y; }
sweep(theta, rate) q[0], q[1];
c[0] = measure q[0];
if (c[0]) { sweep(-theta/2, 0.25) q[1], q[2]; cp(rate) q[0], q[2]; }
c[1] = measure q[2];
