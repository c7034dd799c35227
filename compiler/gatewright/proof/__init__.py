"""Proofs: what they say, the independent checker, and their files."""

from gatewright.proof.checker import check_proof
from gatewright.proof.dense import dense_distance
from gatewright.proof.file import decode_proof, encode_proof, read_proof
from gatewright.proof.fingerprints import Fingerprints, fingerprint
from gatewright.proof.joins import check_program
from gatewright.proof.legality import check_legal
from gatewright.proof.program_file import decode_program_proof, encode_program_proof, read_program_proof
from gatewright.proof.windows import Proof, Step, Verdict

__all__ = [
    "Fingerprints",
    "Proof",
    "Step",
    "Verdict",
    "check_legal",
    "check_program",
    "check_proof",
    "decode_program_proof",
    "decode_proof",
    "dense_distance",
    "encode_program_proof",
    "encode_proof",
    "fingerprint",
    "read_program_proof",
    "read_proof",
]
