"""Set text turned into LaTeX: every character of a stranger's text is data."""

from __future__ import annotations

import re

from hdetermine.report.plaintext import plain

_ESCAPED = {
    "\\": r"\textbackslash{}",
    "&": r"\&",
    "%": r"\%",
    "$": r"\$",
    "#": r"\#",
    "_": r"\_",
    "{": r"\{",
    "}": r"\}",
    "~": r"\textasciitilde{}",
    "^": r"\textasciicircum{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    '"': r"\textquotedbl{}",
    "`": r"\textasciigrave{}",
    "\N{MINUS SIGN}": "$-$",
    "\N{MULTIPLICATION SIGN}": r"$\times$",
    "\N{PLUS-MINUS SIGN}": r"$\pm$",
    "\N{INFINITY}": r"$\infty$",
    "\N{DEGREE SIGN}": r"$^{\circ}$",
    "\N{MICRO SIGN}": r"$\mu$",
    "\N{DAGGER}": r"\dag{}",
    "\N{DOUBLE DAGGER}": r"\ddag{}",
    "\N{EN DASH}": "--",
    "\N{HORIZONTAL ELLIPSIS}": r"\dots{}",
    "\N{NO-BREAK SPACE}": "~",
    "\N{NARROW NO-BREAK SPACE}": r"\,",
}
_GREEK = {
    letter: f"$\\{name}$"
    for letter, name in {
        "α": "alpha", "β": "beta", "γ": "gamma", "δ": "delta", "ε": "varepsilon", "ζ": "zeta",
        "η": "eta", "θ": "theta", "ι": "iota", "κ": "kappa", "λ": "lambda", "μ": "mu", "ν": "nu",
        "ξ": "xi", "π": "pi", "ρ": "rho", "σ": "sigma", "τ": "tau", "υ": "upsilon",
        "φ": "varphi", "χ": "chi", "ψ": "psi", "ω": "omega",
    }.items()
}  # fmt: skip
_RAISED = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")
_LOWERED = str.maketrans("₀₁₂₃₄₅₆₇₈₉", "0123456789")
_RUNS = re.compile("([⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+)|([₀₁₂₃₄₅₆₇₈₉]+)|(.)", re.DOTALL)


def latex_text(text: str, longest: int = 300) -> str:
    r"""Return text for the body of a LaTeX document.

    Special characters are escaped; minus signs, powers, Greek letters and the like become what
    any LaTeX engine knows. Other letters beyond ASCII stay as they are (a Unicode engine, or an
    input encoding that has them, is then needed).

    Parameters
    ----------
    text : str
        Set text, for instance ``2.1 × 10⁻³⁶``.
    longest : int
        Longest text, characters; a longer one is cut.

    Returns
    -------
    str
        On one line.
    """
    parts = []
    for raised, lowered, other in _RUNS.findall(plain(text, longest)):
        if raised:
            parts.append(f"$^{{{raised.translate(_RAISED)}}}$")
        elif lowered:
            parts.append(f"$_{{{lowered.translate(_LOWERED)}}}$")
        else:
            parts.append(_ESCAPED.get(other) or _GREEK.get(other) or other)
    return "".join(parts)
