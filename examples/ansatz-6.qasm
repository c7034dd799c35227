// Two layers of a parametrised ansatz for a ring of six spins, Tarn Hollow laboratory.
// The angles are inputs: compile once, bind them in every round of the optimisation.
OPENQASM 3.0;
include "stdgates.inc";

input angle[32] gamma_1;
input angle[32] gamma_2;
input angle[32] beta_1;
input angle[32] beta_2;
input float tilt;

gate zz(turn) a, b {
  cx a, b;
  rz(turn) b;
  cx a, b;
}

qubit[6] q;
bit[6] c;

ry(tilt) q;
for int i in [0:5] {
  zz(2*gamma_1) q[i], q[(i + 1) % 6];
}
rx(2*beta_1) q;
for int i in [0:5] {
  zz(2*gamma_2) q[i], q[(i + 1) % 6];
}
rx(2*beta_2) q;
inv @ ry(tilt) q;
ctrl @ rz(tilt/2 + pi/8) q[0], q[3];
c = measure q;
