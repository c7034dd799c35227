// Three rounds of a bit-flip code: two ancillas are measured and reset, and the data are corrected as they say.
OPENQASM 3.0;
include "stdgates.inc";

qubit[3] data;
qubit[2] check;
bit[2] syndrome;
bit[3] outcome;

def parities(qubit[3] d, qubit[2] a) -> bit[2] {
  cx d[0], a[0];
  cx d[1], a[0];
  cx d[1], a[1];
  cx d[2], a[1];
  return measure a;
}

rx(pi/2) data[0];
cx data[0], data[1];
cx data[0], data[2];

for int round in [1:3] {
  rx(0.3) data[round - 1];
  syndrome = parities(data, check);
  reset check;
  switch (syndrome) {
    case 1 { x data[0]; }
    case 2 { x data[2]; }
    case 3 { x data[1]; }
    default { }
  }
}
outcome = measure data;
