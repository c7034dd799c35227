OPENQASM 3.0; include "stdgates.inc";
gate twist(a, b) x, y { rx(a/2) x; cx x, y; rz(b**2) y; ctrl @ ry(a - b) y, x; }
gate layer(t) x, y, z { twist(t, -t) x, y; twist(2*t, sin(t)) y, z; inv @ twist(t, 1) z, x; }
qubit[4] q;
layer(0.4) q[0], q[1], q[2]; layer(pi/7) q[3], q[2], q[0]; layer(-1) q[1], q[3], q[0];
