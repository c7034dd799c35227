OPENQASM 3.0; include "stdgates.inc";
qubit[3] a; qubit[4] b; bit[7] c;
let ends = a[0:1] ++ b[{0, 3}]; let odd = b[1:2:3];
h ends; cx a, b[0:2]; cx ends[0], odd[1]; cz b[-1], a[-1];
c[0:2] = measure a; c[3:6] = measure b;
