"""The one table of names: functions, constants, Greek letters, words of the notation.

Parser, printer, help and completion read it, so that they can't drift apart.
"""

FUNCTIONS: dict[str, str] = {
    "sqrt": "square root",
    "exp": "exponential",
    "log": "natural logarithm",
    "sin": "sine",
    "cos": "cosine",
    "tan": "tangent",
    "sinh": "hyperbolic sine",
    "cosh": "hyperbolic cosine",
    "tanh": "hyperbolic tangent",
    "abs": "modulus, also |x|",
}

MEASURES: dict[str, str] = {
    "gap": "energy of the lowest state that the operators create: gap(q), gap(q, q^3)",
    "binder": "cumulant 1 - <(mean q)^4>/(3 <(mean q)^2>^2): binder(q)",
    "charge": "winding number of an angle: <charge(theta)^2>",
    "xi2": "second-moment correlation length of a field on space: xi2(phi)",
}

COMPLEX: dict[str, str] = {
    "conj": "complex conjugate, also psi^*",
    "Re": "real part",
    "Im": "imaginary part",
}

PIECES: dict[str, str] = {
    "table": 'a function given by points: table([[-1, 0.5], [0, 0], [1, 0.5]], q, cubic), table("well.csv", q, linear)',
}

CONSTANTS = ("pi",)
COORDINATES = ("t", "x", "y", "z")
GEOMETRY = ("vol", "beta")  # in measurements
FORMS: dict[str, str] = {
    "L": "Lagrangian (density) in real time, kinetic minus potential energy",
    "LE": "Lagrangian (density) in imaginary time, taken as it stands",
    "SE": "lattice action per site, taken as it stands",
    "H": "Hamiltonian of the paths and their momenta p (p_x, p_y for several), at most quadratic in them",
}
KEYWORDS: dict[str, str] = {
    "lattice": "sites and spacings of the box in imaginary time, and what happens at its ends",
    "measure": "what to report",
    "metric": "the signature, time first; mostly minus where there is none",
    "units": "what numbers count in; natural, hbar = c = 1, where there is none",
}
BOUNDARIES: dict[str, str] = {
    "periodic": "the last site is the neighbour of the first (the default)",
    "open": "the ends are free",
    "antiperiodic": "the field changes its sign from the last site to the first",
    "twist": "the field turns by an angle from the last site to the first: twist x = 0.3",
    "fixed": "the ends have given values: fixed q(0) = -1, q(beta) = 1",
}
RESERVED: dict[str, str] = {
    "mean": "the average over the whole lattice",
    "energy": "the thermal energy",
    "where": "a word of cases in braces",
    "otherwise": "a word of cases in braces",
    "and": "a word of cases in braces",
    "mod": "the word before a period",
    "L": "the Lagrangian",
    "LE": "the Euclidean Lagrangian",
    "SE": "the lattice action",
    "H": "the Hamiltonian",
}  # words that can't be names

# Greek letters: typed letter -> name; several spellings of one name
LETTERS: dict[str, str] = {
    "α": "alpha", "β": "beta", "γ": "gamma", "δ": "delta", "ε": "epsilon", "ζ": "zeta", "η": "eta", "θ": "theta",
    "ϑ": "vartheta", "κ": "kappa", "λ": "lam", "μ": "mu", "ν": "nu", "ξ": "xi", "π": "pi", "ρ": "rho", "σ": "sigma",
    "τ": "tau", "φ": "phi", "ϕ": "phi", "χ": "chi", "ψ": "psi", "ω": "omega", "Γ": "Gamma", "Δ": "Delta", "Θ": "Theta",
    "Λ": "Lambda", "Ξ": "Xi", "Π": "Pi", "Σ": "Sigma", "Φ": "Phi", "Ψ": "Psi", "Ω": "Omega", "ħ": "hbar", "ℏ": "hbar",
}  # fmt: skip
SPELLINGS = {"lambda": "lam", "ln": "log"}  # other words for a name; Python keeps lambda for itself
LATEX_NAMES = {"lam": r"\lambda", **{n: "\\" + n for n in LETTERS.values() if n != "lam"}}
SUPERSCRIPTS = {"⁰": "0", "¹": "1", "²": "2", "³": "3", "⁴": "4", "⁵": "5", "⁶": "6", "⁷": "7", "⁸": "8", "⁹": "9"}
SUBSCRIPTS = {
    **{chr(0x2080 + n): str(n) for n in range(10)},
    **dict(zip("ₐₑₒₓₕₖₗₘₙₚₛₜᵢⱼᵣᵤᵥ", "aeoxhklmnpstijruv", strict=True)),
}
FRACTIONS = {"½": (1, 2), "⅓": (1, 3), "¼": (1, 4), "⅔": (2, 3), "¾": (3, 4), "⅙": (1, 6), "⅛": (1, 8)}


GREEK = "".join(LETTERS)
LOW = "".join(SUBSCRIPTS)
NAME = rf"[A-Za-z{GREEK}][A-Za-z0-9_{GREEK}{LOW}]*"  # as a regular expression
INDEX = "(?:" + "|".join(sorted((*LETTERS.values(), "lambda"), key=len, reverse=True)) + rf"|[A-Za-z{GREEK}])"


def canonical_name(name: str) -> str:
    """One spelling for a name: Greek letters become words, m₀ becomes m_0, lambda becomes lam."""
    if name.isascii():
        return SPELLINGS.get(name, name)
    spelled = ""
    for i, letter in enumerate(name):
        if letter in SUBSCRIPTS:
            joint = "" if i and (name[i - 1] in SUBSCRIPTS or name[i - 1] == "_") else "_"
            spelled += joint + SUBSCRIPTS[letter]
        else:
            spelled += LETTERS.get(letter, letter)
    return SPELLINGS.get(spelled, spelled)
