// Adds two three-bit numbers in place: b becomes a + b, the carry ends in carry_out. OpenQASM 2.
OPENQASM 2.0;
include "qelib1.inc";

gate majority a, b, c {
  cx c, b;
  cx c, a;
  ccx a, b, c;
}

gate unmajority a, b, c {
  ccx a, b, c;
  cx c, a;
  cx a, b;
}

qreg a[3];
qreg b[3];
qreg carry_in[1];
qreg carry_out[1];
creg sum[4];

// a = 5, b = 3
x a[0];
x a[2];
x b[0];
x b[1];

majority carry_in[0], b[0], a[0];
majority a[0], b[1], a[1];
majority a[1], b[2], a[2];
cx a[2], carry_out[0];
unmajority a[1], b[2], a[2];
unmajority a[0], b[1], a[1];
unmajority carry_in[0], b[0], a[0];

measure b[0] -> sum[0];
measure b[1] -> sum[1];
measure b[2] -> sum[2];
measure carry_out[0] -> sum[3];
