OPENQASM 3.0; include "stdgates.inc";
const int n = 3;
qubit[n] q; bit[n] c; bit r;
def entangle(qubit a, qubit b, float t) { ry(t) a; cx a, b; }
def look(qubit a) -> bit { h a; return measure a; }
def ladder(qubit[n] w, int[8] rounds) { for int k in [1:rounds] { entangle(w[0], w[1], k*0.3); entangle(w[1], w[2], -k*0.1); } }
ladder(q, 3);
r = look(q[0]);
if (r) { entangle(q[0], q[2], 0.25); }
c = measure q;
