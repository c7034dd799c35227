OPENQASM 3.0; include "stdgates.inc";
defcalgrammar "openpulse";
cal { port d0; frame f0 = newframe(d0, 5.1e9, 0.0); }
defcal rz(angle[20] theta) $0 { shift_phase(f0, -theta); }
bit c;
h $0; rz(pi/7) $0; cx $0, $1; c = measure $1;
