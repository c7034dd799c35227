"""Judge programs with classical control: every straight-line circuit by its own proof, and the joins between them.

Source and output have the same shape: the same conditions and assignments in the same places. Whatever the measured
bits are, a run passes the same circuits on both sides; on each side its effect is the product of the circuits' (a
Kraus operator for the outcomes), and distances add along the run. What has to hold beside the proofs of the circuits
is that each begins where the one before left the qubits: where branches meet, all that go on have left them on the
same places; a loop's body, and whatever leaves or repeats its round, ends where the body began; and a program that
ends early ends where every run ends. Source qubits alone have to agree: idle ones hold nothing of the source.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from gatewright.circuit import Circuit
from gatewright.classical import Expression, expression_text
from gatewright.errors import ProofError, UndecidedError
from gatewright.program import Assign, Block, If, Leave, Program, Statement, While
from gatewright.proof.checker import check_proof
from gatewright.proof.judge import judge
from gatewright.proof.legality import check_legal
from gatewright.proof.windows import Proof, Verdict

if TYPE_CHECKING:
    from gatewright.devices import Device

__all__ = ["check_program"]

Places = tuple[int, ...]


def check_program(
    source: Program,
    output: Program,
    proofs: Sequence[Proof] | None = None,
    *,
    device: Device | None = None,
    initial: Sequence[int] | None = None,
    tolerance: float = 1e-9,
) -> Verdict:
    """Check the proofs of a program's circuits and the joins between them.

    Parameters
    ----------
    source, output : Program
    proofs : sequence of Proof, optional
        One for each circuit, in the order of the text. Without them every circuit is judged by
        `gatewright.proof.judge.judge`.
    device, tolerance
        As for `gatewright.proof.check_proof`.
    initial : sequence of int, optional
        Without proofs: output qubit of each source qubit at the start; found where it is not given.

    Returns
    -------
    Verdict
        ``error_bound`` holds for every run that passes each loop once at most; ``round_bound`` is what each further
        round adds at most.

    Raises
    ------
    ProofError
        Naming the part of the program.
    UndecidedError
        Without proofs, and no method could tell.
    """
    for what in ("n_bits", "variables"):
        mine, other = getattr(source, what), getattr(output, what)
        if mine != other:
            raise ProofError("not equal: the classical variables differ", required=str(mine), found=str(other))
    start = None if initial is None else tuple(int(q) for q in initial)
    return _Walk(proofs, device, tolerance).program(source, output, start)


class _Walk:
    """One walk through two programs side by side."""

    def __init__(self, proofs: Sequence[Proof] | None, device: Device | None, tolerance: float) -> None:
        self.proofs = None if proofs is None else list(proofs)
        self.device = device
        self.tolerance = tolerance
        self.parts: list[Verdict] = []
        self.round_bound = 0.0
        self.early: Places | None = None  # where the qubits are when the program ends before its end

    def program(self, source: Program, output: Program, start: Places | None) -> Verdict:
        if self.proofs is not None and len(self.proofs) != sum(1 for _ in source.circuits()):
            raise ProofError(
                "the proof does not fit the program",
                required=f"{sum(1 for _ in source.circuits())} circuits",
                found=str(len(self.proofs)),
            )
        begin: list[Places] = []
        final, bound = self.block(source.body, output.body, start, None, begin)
        if final is None:
            final = self.early
        assert final is not None
        if self.early is not None and self.early != final:
            raise self.apart("a run that ends early leaves the qubits on other places", self.early, final)
        worst = max(self.parts, key=lambda part: part.worst_distance)
        return replace(
            worst,
            error_bound=bound,
            windows=sum(part.windows for part in self.parts),
            initial=begin[0],
            final=final,
            method=f"{worst.method}; {len(self.parts)} circuits and the joins between them",
            round_bound=self.round_bound,
        )

    def part(self, meant: Circuit, made: Circuit, number: int, place: Places | None) -> Verdict:
        """Check one circuit by its proof, or judge it without."""
        if self.proofs is not None:
            return check_proof(meant, made, self.proofs[number], device=self.device, tolerance=self.tolerance)
        if self.device is not None:
            check_legal(made, self.device)
        return judge(meant, made, initial=place, tolerance=self.tolerance)

    def apart(self, what: str, required: Places, found: Places) -> ProofError:
        """Return the error of a join; without proofs other places may have been possible too."""
        wanted, is_now = _listed(required), _listed(found)
        if self.proofs is None:
            hint = "compile with --proof and check with that proof"
            what = f"undecided: as far as can be told without a proof, {what}"
            return UndecidedError(what, required=wanted, found=is_now, hint=hint)
        return ProofError(f"not equal: {what}", required=wanted, found=is_now)

    def block(
        self, source: Block, output: Block, place: Places | None, loop: Places | None, begin: list[Places]
    ) -> tuple[Places | None, float]:
        """Check a block that begins with the qubits on `place`; return where it leaves them, and its bound."""
        if len(source.statements) != len(output.statements):
            raise ProofError(
                "not equal: the output has other classical statements",
                required=f"{len(source.statements)} in this block",
                found=str(len(output.statements)),
            )
        total = 0.0
        gone = False
        circuits = zip(source.circuits, output.circuits, strict=True)
        pairs = zip(source.statements, output.statements, strict=True)
        for meant, made in circuits:
            number = len(self.parts)
            try:
                part = self.part(meant, made, number, place)
            except ProofError as problem:
                problem.what = f"{problem.what} (circuit {number} of the program)"
                raise
            if place is not None and part.initial != place:
                raise self.apart(f"circuit {number} does not begin where its qubits are", place, part.initial)
            if not begin:
                begin.append(part.initial)
            self.parts.append(part)
            total += part.error_bound
            place = part.final
            statement, other = next(pairs, (None, None))
            if statement is None or other is None:
                break
            # Behind a statement that never goes on, what follows is never reached; it is checked all the same.
            there, more = self.statement(statement, other, place, loop)
            gone |= there is None
            place = place if there is None else there
            total += more
        return (None if gone else place), total

    def statement(
        self, source: Statement, output: Statement, place: Places, loop: Places | None
    ) -> tuple[Places | None, float]:
        match source, output:
            case Assign(), Assign() if source == output:
                return place, 0.0
            case Leave(word), Leave(other) if word == other:
                self.leave(word, place, loop)
                return None, 0.0
            case If(condition, then, otherwise), If(other, then_made, otherwise_made) if condition == other:
                first, a = self.block(then, then_made, place, loop, [place])
                second, b = self.block(otherwise, otherwise_made, place, loop, [place])
                if first is not None and second is not None and first != second:
                    raise self.apart("the branches of an 'if' leave the qubits on different places", first, second)
                return (first if first is not None else second), max(a, b)
            case While(condition, body), While(other, made) if condition == other:
                end, bound = self.block(body, made, place, place, [place])
                if end is not None and end != place:
                    raise self.apart("a round of a loop does not leave the qubits where it found them", place, end)
                self.round_bound += bound
                return place, bound
        raise ProofError(
            "not equal: a classical statement of the output differs from the source",
            required=_shown(source),
            found=_shown(output),
        )

    def leave(self, word: str, place: Places, loop: Places | None) -> None:
        wanted = self.early if word == "end" else loop
        if word == "end" and self.early is None:
            self.early = wanted = place
        if wanted != place:
            raise self.apart(f"a '{word}' leaves the qubits on other places than the rest", wanted or (), place)


def _listed(places: Places) -> str:
    return "qubits on " + ", ".join(map(str, places[:16]))


def _shown(statement: Statement) -> str:
    match statement:
        case If(condition) | While(condition):
            text = f"{type(statement).__name__.lower()} ({_text(condition)})"
        case Assign(target, value):
            text = f"{_text(target)} = {_text(value)}"
        case Leave(word):
            text = word
    return f"'{text[:120]}'"


def _text(expression: Expression) -> str:
    return expression_text(expression, lambda bits: f"bit[{', '.join(map(str, bits.indices))}]")
