OPENQASM 2.0;
include "qelib1.inc";
qreg q[3]; creg c[2]; creg d[1];
h q[0]; cx q[0],q[1]; measure q[0] -> c[0]; measure q[1] -> c[1];
if(c==3) x q[2];
if(c==0) u3(pi/2,0,pi) q[2];
if(c==1) cx q[0],q[2];
measure q[2] -> d[0];
if (d==01) measure q[1] -> c[0];
