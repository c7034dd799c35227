// Iterative phase estimation with one ancilla: four bits of the phase of p(2*pi*11/16), the least significant first.
OPENQASM 3.0;
include "stdgates.inc";

const int[8] digits = 4;
const angle turn = 2*pi*11/16;

qubit ancilla;
qubit eigenstate;
bit[digits] found;

x eigenstate;
for int k in [0:digits - 1] {
  reset ancilla;
  h ancilla;
  ctrl @ pow(2**(digits - 1 - k)) @ p(turn) ancilla, eigenstate;
  // Turn back by the digits that are known already.
  for int j in [0:k - 1] {
    if (found[j]) { p(-pi/2**(k - j)) ancilla; }
  }
  h ancilla;
  found[k] = measure ancilla;
}
