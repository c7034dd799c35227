"""What compiling gives: the native circuit or program with its proof, its costs and their lower bounds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, replace
from typing import Any

import numpy as np

from gatewright._version import __version__
from gatewright.circuit import Circuit
from gatewright.cost import SUCCESS_MODEL, Bound, Costs
from gatewright.devices import Device
from gatewright.gates import GATES
from gatewright.program import Program
from gatewright.proof import Fingerprints, Proof, Verdict, encode_program_proof, encode_proof
from gatewright.synthesis.definition import definition_of

__all__ = ["ProgramResult", "Result"]


@dataclass(frozen=True, eq=False, slots=True, repr=False, kw_only=True)
class _Compiled:
    """What is known of everything compiled; see `Result`."""

    device: Device
    verdict: Verdict
    costs: Costs
    lower_bound: Bound
    budget: list[dict[str, Any]]
    seed: int
    tolerance: float
    effort: str
    moved: float = 0.0
    seconds: dict[str, float] = field(default_factory=dict)

    @property
    def initial(self) -> tuple[int, ...]:
        """Physical qubit of each source qubit at the start."""
        return self.verdict.initial

    @property
    def final(self) -> tuple[int, ...]:
        """Physical qubit of each source qubit at the end."""
        return self.verdict.final

    def _summary(self, source: Circuit | Program, flat: Circuit) -> dict[str, Any]:
        two = flat.is_gate & (flat.widths == 2)
        return {
            "version": __version__,
            "seed": self.seed,
            "effort": self.effort,
            "tolerance": self.tolerance,
            "device": self.device.name,
            "gate_set": self.device.gate_set.name,
            "measured_gates": self.device.gate_set.measured,
            "input": {
                "qubits": source.n_qubits,
                "operations": len(source),
                "two_qubit_gates": int(np.count_nonzero(two)),
                "distance_moved": self.moved,
                **({"parameters": dict(flat.inputs)} if flat.inputs else {}),
            },
            "output": {**asdict(self.costs), "success_model": SUCCESS_MODEL},
            "lower_bound": asdict(self.lower_bound),
            "placement": {"initial": list(self.initial), "final": list(self.final)},
            "proof": self.verdict.to_dict(),
            "budget": self.budget,
            "seconds": {stage: round(value, 6) for stage, value in self.seconds.items()},
        }

    def _to_qasm(self, output: Circuit | Program, version: int) -> str:
        from gatewright.qasm import map_lines, write

        definitions = {
            name: native.definition or definition_of(native.gate)
            for name, native in self.device.gate_set.gates.items()
            if native.definition or name not in GATES
        }
        rounds = self.verdict.round_bound
        more = f", and {rounds:.3g} for each further round of a loop" if rounds else ""
        header = [
            f"gatewright {__version__}, seed {self.seed}, device {self.device.name}",
            f"proven equal to its source within {self.verdict.error_bound:.3g}{more} "
            "(operator norm, up to global phase)",
        ]
        return write(
            output,
            version=version,
            definitions=definitions,
            header=[f"// {line}" for line in header] + map_lines(self.initial, self.final),
        )

    def _shown(self, output: Circuit | Program) -> str:
        cost = f"{self.costs.two_qubit_gates} two-qubit gates, at least {self.lower_bound.two_qubit_gates}"
        bound = f"error bound {self.verdict.error_bound:.2g}"
        return f"{type(self).__name__}({output!r} on {self.device.name}: {cost}; {bound})"


@dataclass(frozen=True, eq=False, slots=True, repr=False, kw_only=True)
class Result(_Compiled):
    """A compiled circuit with everything that is known about it; it exists only if the proof holds.

    Attributes
    ----------
    circuit : Circuit
        Native gates on physical qubits, in order of start time.
    source : Circuit
        What was asked for.
    device : Device
    proof : Proof
    verdict : Verdict
        The checker's findings; ``verdict.error_bound`` bounds the operator-norm distance up to global phase.
    costs : Costs
    lower_bound : Bound
    budget : list of dict
        Each limit, its value, and whether it is met.
    starts : ndarray, shape (operations,)
        Start of each operation: nanoseconds, or layers where the device states no durations.
    seed, tolerance, effort
        As used.
    moved : float
        Distance from the matrix given to the unitary that was compiled; 0 for circuits.
    seconds : dict of str to float
        Time taken by each stage.
    """

    circuit: Circuit
    source: Circuit
    proof: Proof
    starts: np.ndarray

    def __repr__(self) -> str:
        """Return a short summary."""
        return self._shown(self.circuit)

    def bind(self, values: Mapping[str, float]) -> Result:
        """Give inputs of the program their values, after compiling; names that are not given stay unknown.

        Angles are brought into the ranges of the native gates by full turns. The result is proven anew; what it
        costs is the same.

        Parameters
        ----------
        values : mapping of str to float

        Raises
        ------
        CircuitError
            A name that is not an input, or a value that does not fit its type.

        Examples
        --------
        >>> import gatewright as gw, sympy
        >>> theta = sympy.Symbol("theta")
        >>> circuit = gw.Builder(2).gate("h", 0).gate("crz", 0, 1, parameters=[theta]).build()
        >>> result = gw.compile(circuit, gw.Device.from_graph([(0, 1)], "cz-virtual-z"))
        >>> [str(value) for op in result.circuit for value in op.parameters if not isinstance(value, float)]
        ['theta/2', '-theta/2']
        >>> result.bind({"theta": 0.5}).circuit.inputs
        ()
        """
        from gatewright.pipeline import proven

        ranges = {name: native.ranges for name, native in self.device.gate_set.gates.items()}
        source, circuit = self.source.bind(values), self.circuit.bind(values, ranges=ranges)
        steps = [
            step if step.output is None else replace(step, output=step.output.bind(values)) for step in self.proof.steps
        ]
        proof = Proof(tuple(steps), Fingerprints.of(source, circuit, self.device))
        verdict = proven(source, circuit, proof, device=self.device, tolerance=self.tolerance)
        return replace(self, circuit=circuit, source=source, proof=proof, verdict=verdict)

    def summary(self) -> dict[str, Any]:
        """Return what the command line writes as JSON."""
        return self._summary(self.source, self.source)

    def encode_proof(self) -> bytes:
        """Return the bytes of the proof file, for `gatewright.read_proof` and ``gatewright check``."""
        return encode_proof(self.proof)

    def to_qasm(self, *, version: int = 3) -> str:
        """Return the circuit as an OpenQASM program, with the placement in its header.

        Parameters
        ----------
        version : int
            3 or 2.
        """
        return self._to_qasm(self.circuit, version)


@dataclass(frozen=True, eq=False, slots=True, repr=False, kw_only=True)
class ProgramResult(_Compiled):
    """A compiled program with classical control; it exists only if its circuits and their joins are proven.

    Attributes
    ----------
    program : Program
        Native gates on physical qubits, the source's control statements around them.
    source : Program
    proofs : tuple of Proof
        One for each circuit, in the order of the text.
    device, verdict, costs, lower_bound, budget, seed, tolerance, effort, seconds
        As for `Result`. Gates are counted over all branches, each loop once; depth and duration are those of the
        longest run that passes each loop once, every circuit waiting for the one before.
    """

    program: Program
    source: Program
    proofs: tuple[Proof, ...]

    def __repr__(self) -> str:
        """Return a short summary."""
        return self._shown(self.program)

    def summary(self) -> dict[str, Any]:
        """Return what the command line writes as JSON."""
        return self._summary(self.source, self.source.joined())

    def encode_proof(self) -> bytes:
        """Return the bytes of the proof file, for `gatewright.read_proof` and ``gatewright check``."""
        return encode_program_proof(self.proofs)

    def to_qasm(self, *, version: int = 3) -> str:
        """Return the program as OpenQASM, with the placement in its header; see `Result.to_qasm`."""
        return self._to_qasm(self.program, version)
