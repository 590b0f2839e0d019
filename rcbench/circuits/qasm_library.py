"""The built-in gates of OpenQASM and its two standard gate files, `qelib1.inc` (2.0) and `stdgates.inc` (3).

What is one of our kinds is a row of a table; the rest is written in OpenQASM itself, from the matrices that the
specification and the names give. Matrices carry the global phase of OpenQASM 3, which shows under `ctrl @` only.

Source: Cross et al., Open Quantum Assembly Language, arXiv:1707.03429; OpenQASM 3, arXiv:2104.14722, and the live
specification's definition of U, without the factor exp(i theta/2) of the paper.
"""

from __future__ import annotations

import math

from rcbench.circuits.qasm_gates import Gate, GlobalPhase, StandardGate

_HALF = math.pi / 2

_TABLE: tuple[Gate, ...] = (
    GlobalPhase(),
    StandardGate("U", 3, "u"),
    StandardGate("CX", 0, "cx"),
    *(StandardGate(kind, 0, kind) for kind in ("x", "y", "z", "h", "s", "sdg", "sx", "sxdg", "cz", "cx")),
    StandardGate("t", 0, "rz", lambda _: (math.pi / 4,), lambda _: math.pi / 8),
    StandardGate("tdg", 0, "rz", lambda _: (-math.pi / 4,), lambda _: -math.pi / 8),
    *(StandardGate(name, 1, "rz", None, lambda p: p[0] / 2) for name in ("p", "phase", "u1")),
    StandardGate("rz", 1, "rz"),
    StandardGate("rx", 1, "r", lambda p: (p[0], 0.0)),
    StandardGate("ry", 1, "r", lambda p: (p[0], _HALF)),
    StandardGate("u", 3, "u"),
    StandardGate("u2", 2, "u", lambda p: (_HALF, p[0], p[1]), lambda p: -(p[0] + p[1]) / 2),
    StandardGate("u3", 3, "u", None, lambda p: -(p[1] + p[2]) / 2),
    StandardGate("rzz", 1, "zz"),
    StandardGate("cp", 1, "fsim", lambda p: (0.0, -p[0])),
    StandardGate("cphase", 1, "fsim", lambda p: (0.0, -p[0])),
    StandardGate("cu1", 1, "fsim", lambda p: (0.0, -p[0])),
)
STANDARD: dict[str, Gate] = {gate.name: gate for gate in _TABLE}

# The derived gates, in an order in which each uses earlier ones only
DERIVED = """
gate id a { U(0, 0, 0) a; }
gate u0(g) a { U(0, 0, 0) a; }
gate swap a, b { cx a, b; cx b, a; cx a, b; }
gate cy a, b { ctrl @ y a, b; }
gate ch a, b { ctrl @ h a, b; }
gate csx a, b { ctrl @ sx a, b; }
gate crx(t) a, b { ctrl @ rx(t) a, b; }
gate cry(t) a, b { ctrl @ ry(t) a, b; }
gate crz(t) a, b { ctrl @ rz(t) a, b; }
gate cu3(t, p, l) a, b { ctrl @ U(t, p, l) a, b; }
gate cu(t, p, l, g) a, b { p(g) a; ctrl @ U(t, p, l) a, b; }
gate rxx(t) a, b { h a; h b; rzz(t) a, b; h a; h b; }
gate ccx a, b, c {
  h c; cx b, c; tdg c; cx a, c; t c; cx b, c; tdg c; cx a, c; t b; t c; h c; cx a, b; t a; tdg b; cx a, b;
}
gate cswap a, b, c { cx c, b; ccx a, b, c; cx c, b; }
gate rccx a, b, c { h c; t c; cx b, c; tdg c; cx a, c; t c; cx b, c; tdg c; h c; }
gate rc3x a, b, c, d {
  h d; t d; cx c, d; tdg d; h d; cx a, d; t d; cx b, d; tdg d; cx a, d; t d; cx b, d; tdg d; h d; t d; cx c, d; tdg d;
  h d;
}
gate c3p(t) a, b, c, d {
  cp(t / 4) a, d; cx a, b; cp(-t / 4) b, d; cx a, b; cp(t / 4) b, d;
  cx b, c; cp(-t / 4) c, d; cx a, c; cp(t / 4) c, d; cx b, c; cp(-t / 4) c, d; cx a, c; cp(t / 4) c, d;
}
gate c3x a, b, c, d { h d; c3p(pi) a, b, c, d; h d; }
gate c3sqrtx a, b, c, d { h d; c3p(pi / 2) a, b, c, d; h d; }
gate c4x a, b, c, d, e {
  h e; cp(pi / 2) d, e; h e; c3x a, b, c, d; h e; cp(-pi / 2) d, e; h e; c3x a, b, c, d; c3sqrtx a, b, c, e;
}
"""


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


# names that each file and each version offer; c3p above is ours and stays inside
NAMES: dict[str, frozenset[str]] = {
    "qelib1.inc": _words(
        "u3 u2 u1 cx id u0 u p x y z h s sdg t tdg rx ry rz sx sxdg cz cy swap ch ccx cswap crx cry crz cu1 cp cu3 csx"
        " cu rxx rzz rccx rc3x c3x c3sqrtx c4x"
    ),
    "stdgates.inc": _words(
        "p x y z h s sdg t tdg sx rx ry rz cx cy cz cp crx cry crz ch swap ccx cswap cu CX phase cphase id u1 u2 u3"
    ),
    "OpenQASM 2": _words("U CX"),
    "OpenQASM 3": _words("U gphase"),
}
