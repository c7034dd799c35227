OPENQASM 3.0; include "stdgates.inc";
const duration pause = 120ns;
qubit[3] q; bit c;
h q[0]; delay[pause] q[0]; cx q[0], q[2];
box { x q[1]; delay[2*pause + 0.5us] q[1]; cx q[1], q[2]; }
delay[1ms] q; c = measure q[0];
if (c) { delay[pause] q[1]; z q[1]; }
