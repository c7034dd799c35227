OPENQASM 3.0; include "stdgates.inc";
const int[16] n = 0x10 + 0b11 - 0o7; const uint m = popcount("1011"); const float w = sqrt(2)*tau/8; const angle[8] g = pi/3;
const bool on = n > m && !false; const bit[4] mask = "0110" << 1;
qubit[3] q;
rz(w) q[0]; ry(g) q[1]; rx(arccos(0.3) + exp(0.2) - ln(3)) q[2];
if (on) { p(float(int(mask))/10) q[0]; }
U(π/2, ceiling(0.2), mod(7, 4)) q[1]; gphase(euler/3); cu(1, 2, 3, 4) q[0], q[2];
