"""The two standard libraries by name, and OpenQASM definitions of the table gates that they lack.

``stdgates.inc`` is that of the OpenQASM 3 specification (arXiv:2104.14722), ``qelib1.inc`` that of OpenQASM 2
(arXiv:1707.03429) with the additions of its later releases. Neither file is ever opened: the gates are those of
`gatewright.gates`. The multiply controlled gates follow Barenco et al., PRA 52, 3457 (1995), section 7; the
relative-phase Toffolis Margolus and Maslov, PRA 93, 022311 (2016).
"""

from __future__ import annotations

__all__ = ["BUILT_IN", "DEFINITIONS", "LIBRARIES", "LIBRARY_FILES"]

#: The file that each version includes.
LIBRARY_FILES: dict[int, str] = {2: "qelib1.inc", 3: "stdgates.inc"}

#: Gates of the language itself, known without an include.
BUILT_IN: dict[int, frozenset[str]] = {2: frozenset(("U", "CX")), 3: frozenset(("U",))}

#: Gates that become known with the include.
LIBRARIES: dict[int, frozenset[str]] = {
    2: frozenset(
        "id x y z h s sdg t tdg sx sxdg p u u1 u2 u3 rx ry rz cx cy cz ch csx swap cp cu1 crx cry crz cu3 cu rxx rzz"
        " ccx cswap rccx rc3x c3x c3sqrtx c4x".split()
    ),
    3: frozenset(
        "id x y z h s sdg t tdg sx p phase u1 u2 u3 rx ry rz cx CX cy cz ch swap cp cphase crx cry crz cu"
        " ccx cswap".split()
    ),
}


def _controlled_root(name: str, angle: str) -> str:
    """Three controls on the gate whose fourth root is ``h; p(angle); h`` (Barenco et al., lemma 7.5)."""
    plus, minus = f"cp({angle})", f"cp(-{angle})"
    return (
        f"gate {name} a, b, c, d {{ h d; {plus} a, d; cx a, b; {minus} b, d; cx a, b; {plus} b, d; cx b, c;"
        f" {minus} c, d; cx a, c; {plus} c, d; cx b, c; {minus} c, d; cx a, c; {plus} c, d; h d; }}"
    )


_EITHER = {
    "r": "gate r(theta, phi) a { u3(theta, phi - pi/2, pi/2 - phi) a; }",
    "iswap": "gate iswap a, b { s a; s b; h a; cx a, b; cx b, a; h b; }",
    "ryy": (
        "gate ryy(theta) a, b { rx(pi/2) a; rx(pi/2) b; cx a, b; rz(theta) b; cx a, b; rx(-pi/2) a; rx(-pi/2) b; }"
    ),
    "rzx": "gate rzx(theta) a, b { h b; cx a, b; rz(theta) b; cx a, b; h b; }",
    "ccz": "gate ccz a, b, c { h c; ccx a, b, c; h c; }",
}

#: Definitions of what a version's library lacks; each uses the library, and earlier entries of its own table.
DEFINITIONS: dict[int, dict[str, str]] = {
    2: {
        **_EITHER,
        "phase": "gate phase(lambda) a { u1(lambda) a; }",
        "cphase": "gate cphase(lambda) a, b { cu1(lambda) a, b; }",
    },
    3: {
        **_EITHER,
        "sxdg": "gate sxdg a { h a; sdg a; h a; }",
        "u": "gate u(theta, phi, lambda) a { gphase(-theta/2); U(theta, phi, lambda) a; }",
        "csx": "gate csx a, b { h b; cp(pi/2) a, b; h b; }",
        "cu1": "gate cu1(lambda) a, b { cp(lambda) a, b; }",
        "cu3": "gate cu3(theta, phi, lambda) a, b { cu(theta, phi, lambda, 0) a, b; }",
        "rxx": "gate rxx(theta) a, b { h a; h b; cx a, b; rz(theta) b; cx a, b; h a; h b; }",
        "rzz": "gate rzz(theta) a, b { cx a, b; rz(theta) b; cx a, b; }",
        "rccx": "gate rccx a, b, c { h c; t c; cx b, c; tdg c; cx a, c; t c; cx b, c; tdg c; h c; }",
        "rc3x": (
            "gate rc3x a, b, c, d { h d; t d; cx c, d; tdg d; h d; cx a, d; t d; cx b, d; tdg d; cx a, d; t d;"
            " cx b, d; tdg d; h d; t d; cx c, d; tdg d; h d; }"
        ),
        "c3x": _controlled_root("c3x", "pi/4"),
        "c3sqrtx": _controlled_root("c3sqrtx", "pi/8"),
        "c4x": (
            "gate c4x a, b, c, d, e { h e; cp(pi/2) d, e; h e; c3x a, b, c, d; h e; cp(-pi/2) d, e; h e;"
            " c3x a, b, c, d; c3sqrtx a, b, c, e; }"
        ),
    },
}
