"""Proof files of programs with classical control: a zip archive of one proof file for each straight-line circuit.

``program.json`` states the format, its version and the number of circuits; ``0.proof``, ``1.proof`` and so on are
proof files as in `gatewright.proof.file`, in the order of the text. The bytes depend on the proofs alone.
"""

from __future__ import annotations

import io
import json
import zipfile
from collections.abc import Sequence
from pathlib import Path

from gatewright.errors import ProofFileError, shorten
from gatewright.proof.file import decode_proof, encode_proof, read_file
from gatewright.proof.windows import Proof

__all__ = ["decode_program_proof", "encode_program_proof", "read_program_proof"]

FORMAT = "gatewright-program-proof"
FORMAT_VERSION = 1
MAX_CIRCUITS = 1_000_000
#: Largest size of all members together.
MAX_BYTES = 1 << 32


def encode_program_proof(proofs: Sequence[Proof]) -> bytes:
    """Return the bytes of a program's proof file.

    Raises
    ------
    ProofFileError
        As `gatewright.proof.file.encode_proof`.
    """
    buffer = io.BytesIO()
    header = {"format": FORMAT, "format_version": FORMAT_VERSION, "circuits": len(proofs)}
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_STORED) as archive:
        # ZipInfo's fixed default date keeps the bytes the same from run to run.
        archive.writestr(zipfile.ZipInfo("program.json"), json.dumps(header, indent=1))
        for number, proof in enumerate(proofs):
            archive.writestr(zipfile.ZipInfo(f"{number}.proof"), encode_proof(proof))
    return buffer.getvalue()


def read_program_proof(path: str | Path) -> tuple[Proof, ...]:
    """Read a program's proof file.

    Raises
    ------
    ProofFileError
        Missing, truncated, edited, of another version, or the proof of a straight-line circuit.
    """
    return read_file(path, decode_program_proof)


def decode_program_proof(data: bytes) -> tuple[Proof, ...]:
    """Decode the bytes of a program's proof file; see `read_program_proof`."""
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            members = {info.filename: info for info in archive.infolist()}
            if "program.json" not in members:
                raise ProofFileError("this is not the proof of a program", required="an archive with program.json")
            if sum(info.file_size for info in members.values()) > MAX_BYTES or len(members) > MAX_CIRCUITS:
                raise ProofFileError("the proof file is too large", required=f"{MAX_BYTES} bytes at most")
            header = json.loads(archive.read("program.json"))
            if not isinstance(header, dict) or header.get("format") != FORMAT:
                raise ProofFileError("this is not the proof of a program", required=f"format '{FORMAT}'")
            if header.get("format_version") != FORMAT_VERSION:
                raise ProofFileError("the proof file is of another version", required=str(FORMAT_VERSION))
            count = int(header["circuits"])
            if count + 1 != len(members):
                raise ProofFileError("the proof file is damaged", required=f"{count} circuits")
            return tuple(decode_proof(archive.read(f"{number}.proof")) for number in range(count))
    except ProofFileError:
        raise
    except (zipfile.BadZipFile, OSError, EOFError, NotImplementedError, RuntimeError) as error:
        raise ProofFileError("the proof file is damaged", found=shorten(error)) from None
    except (KeyError, TypeError, ValueError, OverflowError) as error:
        raise ProofFileError("the proof file is damaged", found=shorten(error)) from None
