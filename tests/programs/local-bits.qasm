// Bits of blocks, loops and subroutines, and measurements that are read where they are made.
OPENQASM 3.0;
include "stdgates.inc";

def parity(qubit a, qubit b, qubit helper) -> bit {
  bit found;
  reset helper;
  cx a, helper;
  cx b, helper;
  found = measure helper;
  return found;
}

def both(qubit[2] pair) -> bit[2] {
  bit[2] seen = measure pair;
  return seen;
}

def corrected(qubit a, bit start) -> int {
  bit b = start;
  int flips = 0;
  if (b) {
    x a;
    b = measure a;
    flips += 1;
  }
  start = measure a;
  if (start) { flips += 2; }
  return flips;
}

def tossed(qubit a) -> bool {
  h a;
  return measure a;
}

qubit[4] q;
bit[2] c;
int total = 0;

h q[0];
cx q[0], q[1];
if (parity(q[0], q[1], q[2])) { x q[1]; }

for uint k in [0:1] {
  bit outcome = measure q[k];
  if (outcome) { ry(pi / 3) q[k + 1]; }
}

bool ok = measure q[3];
ok = measure q[2];
if (!ok) { h q[3]; }

int n = corrected(q[0], c[0]) + 1;
if (n > 2) { z q[1]; }
total += n;

while (total < 6) {
  bit[2] pair;
  h q[0];
  pair = measure q[0:1];
  if (pair == 2) {
    bit inner = measure q[3];
    c[1] ^= inner;
    total += 2;
  }
  total += 1;
}

int rounds = 0;
while (tossed(q[2])) {
  rounds += 1;
  if (rounds == 4) { break; }
  cx q[2], q[0];
}

switch (both(q[0:1])) {
  case 1, 2 { x q[3]; }
  default { s q[3]; }
}
c[0] = parity(q[0], q[3], q[2]) ^ c[1];
