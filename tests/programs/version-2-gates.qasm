OPENQASM 2.0;
include "qelib1.inc";
gate majority a,b,c { cx c,b; cx c,a; ccx a,b,c; }
opaque secret(x) a;
qreg q[4];
creg c[4];
U(pi/2,0,pi) q[0]; CX q[0],q[1]; u1(3*pi/4) q[1]; u2(0,-pi) q[2]; u3(0.1,0.2,0.3) q[3];
majority q[0],q[1],q[2]; h q; crz(pi/8) q[1],q[3]; cu3(0.1,0.2,0.3) q[2],q[0]; barrier q; measure q -> c;
