OPENQASM 3.0; include "stdgates.inc";
bit[2] c;
h $0; cx $0, $2; ry(0.3) $1; cx $1, $0;
c[0] = measure $0;
if (c[0]) { x $2; }
c[1] = measure $2;
