// Teleportation with feed-forward: the state of `message` arrives on `there`, whatever is measured.
OPENQASM 3.0;
include "stdgates.inc";

qubit message;
qubit here;
qubit there;
bit[2] note;

// A state worth sending.
ry(0.81) message;
rz(-2*pi/7) message;

// A pair shared beforehand.
h here;
cx here, there;

// What the sender does and tells.
cx message, here;
h message;
note[0] = measure message;
note[1] = measure here;

// What the receiver does with it.
if (note[1]) { x there; }
if (note[0]) { z there; }
