// Three Trotter steps of a ring of ten spins with couplings along x, y and z and a field along z.
OPENQASM 3.0;
include "stdgates.inc";

gate exchange(jx, jy, jz) a, b {
  // x
  h a;
  h b;
  cx a, b;
  rz(jx) b;
  cx a, b;
  h a;
  h b;
  // y
  rx(pi/2) a;
  rx(pi/2) b;
  cx a, b;
  rz(jy) b;
  cx a, b;
  rx(-pi/2) a;
  rx(-pi/2) b;
  // z
  cx a, b;
  rz(jz) b;
  cx a, b;
}

qubit[10] spin;

rz(0.35) spin[0];
rz(0.35) spin[1];
rz(0.35) spin[2];
rz(0.35) spin[3];
rz(0.35) spin[4];
rz(0.35) spin[5];
rz(0.35) spin[6];
rz(0.35) spin[7];
rz(0.35) spin[8];
rz(0.35) spin[9];
exchange(0.21, 0.17, 0.4) spin[0], spin[1];
exchange(0.21, 0.17, 0.4) spin[2], spin[3];
exchange(0.21, 0.17, 0.4) spin[4], spin[5];
exchange(0.21, 0.17, 0.4) spin[6], spin[7];
exchange(0.21, 0.17, 0.4) spin[8], spin[9];
exchange(0.21, 0.17, 0.4) spin[1], spin[2];
exchange(0.21, 0.17, 0.4) spin[3], spin[4];
exchange(0.21, 0.17, 0.4) spin[5], spin[6];
exchange(0.21, 0.17, 0.4) spin[7], spin[8];
exchange(0.21, 0.17, 0.4) spin[9], spin[0];
rz(0.35) spin[0];
rz(0.35) spin[1];
rz(0.35) spin[2];
rz(0.35) spin[3];
rz(0.35) spin[4];
rz(0.35) spin[5];
rz(0.35) spin[6];
rz(0.35) spin[7];
rz(0.35) spin[8];
rz(0.35) spin[9];
exchange(0.21, 0.17, 0.4) spin[0], spin[1];
exchange(0.21, 0.17, 0.4) spin[2], spin[3];
exchange(0.21, 0.17, 0.4) spin[4], spin[5];
exchange(0.21, 0.17, 0.4) spin[6], spin[7];
exchange(0.21, 0.17, 0.4) spin[8], spin[9];
exchange(0.21, 0.17, 0.4) spin[1], spin[2];
exchange(0.21, 0.17, 0.4) spin[3], spin[4];
exchange(0.21, 0.17, 0.4) spin[5], spin[6];
exchange(0.21, 0.17, 0.4) spin[7], spin[8];
exchange(0.21, 0.17, 0.4) spin[9], spin[0];
rz(0.35) spin[0];
rz(0.35) spin[1];
rz(0.35) spin[2];
rz(0.35) spin[3];
rz(0.35) spin[4];
rz(0.35) spin[5];
rz(0.35) spin[6];
rz(0.35) spin[7];
rz(0.35) spin[8];
rz(0.35) spin[9];
exchange(0.21, 0.17, 0.4) spin[0], spin[1];
exchange(0.21, 0.17, 0.4) spin[2], spin[3];
exchange(0.21, 0.17, 0.4) spin[4], spin[5];
exchange(0.21, 0.17, 0.4) spin[6], spin[7];
exchange(0.21, 0.17, 0.4) spin[8], spin[9];
exchange(0.21, 0.17, 0.4) spin[1], spin[2];
exchange(0.21, 0.17, 0.4) spin[3], spin[4];
exchange(0.21, 0.17, 0.4) spin[5], spin[6];
exchange(0.21, 0.17, 0.4) spin[7], spin[8];
exchange(0.21, 0.17, 0.4) spin[9], spin[0];
