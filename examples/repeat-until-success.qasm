// Repeat until success: two ancillas herald a rotation of `work` about z by an angle whose cosine is 3/5.
// A circuit after Nielsen and Chuang, exercise 4.41; a failed attempt leaves a Z, which is undone.
OPENQASM 3.0;
include "stdgates.inc";

qubit work;
qubit[2] herald;
bit[2] flags;
uint[8] attempts = 0;

ry(pi/5) work;

bool done = false;
while (!done) {
  reset herald;
  h herald;
  ccx herald[0], herald[1], work;
  s work;
  ccx herald[0], herald[1], work;
  h herald;
  flags = measure herald;
  attempts += 1;
  done = flags == 0;
  if (!done) { z work; }
}
