// a generator of no fixed habits
OPENQASM 2.0;
include "qelib1.inc";
qreg	q[03];creg c[3];
h q[0];cx q[00],q[1] ;// end
rz( - pi/04 )  q[2]
;
u3(.5,2.,1e-1) q[1]; rx(2*pi/3+pi) q[2];
if(c==05)
  x q[1];
measure q->c;