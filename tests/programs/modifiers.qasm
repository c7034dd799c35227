OPENQASM 3.0; include "stdgates.inc";
qubit[4] q;
h q;
ctrl @ rx(pi/3) q[0], q[1]; negctrl @ ctrl @ z q[0], q[1], q[2]; inv @ s q[3]; pow(1/3) @ x q[2];
ctrl(2) @ pow(0.5) @ h q[1], q[2], q[3]; inv @ ctrl @ U(1, 2, 3) q[3], q[0]; ctrl @ gphase(pi/5) q[1]; pow(-2) @ t q[0];
