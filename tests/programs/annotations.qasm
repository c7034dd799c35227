OPENQASM 3.0; include "stdgates.inc";
pragma laboratory careful
qubit[3] q; bit c;
@slowly
h q[0];
@twice and more
cx q[0], q[2];
barrier q;
#pragma old style
c = measure q[0];
@perhaps
if (c) { @inside
 x q[1]; }
