"""The LaTeX macros that a report may contain, and the character or the meaning of each.

An allow-list: a macro that is not in one of these tables is refused by `latex`, never drawn as it stands.
"""

from __future__ import annotations

_GREEK = {
    "alpha": "α", "beta": "β", "gamma": "γ", "delta": "δ", "epsilon": "ϵ", "varepsilon": "ε", "zeta": "ζ",
    "eta": "η", "theta": "θ", "vartheta": "ϑ", "iota": "ι", "kappa": "κ", "lambda": "λ", "mu": "μ",
    "nu": "ν", "xi": "ξ", "pi": "π", "varpi": "ϖ", "rho": "ρ", "varrho": "ϱ", "sigma": "σ",
    "varsigma": "ς", "tau": "τ", "upsilon": "υ", "phi": "ϕ", "varphi": "φ", "chi": "χ", "psi": "ψ",
    "omega": "ω", "Gamma": "Γ", "Delta": "Δ", "Theta": "Θ", "Lambda": "Λ", "Xi": "Ξ", "Pi": "Π",
    "Sigma": "Σ", "Upsilon": "Υ", "Phi": "Φ", "Psi": "Ψ", "Omega": "Ω",
}  # fmt: skip

LETTERS = {**_GREEK, "ell": "ℓ", "partial": "𝜕", "nabla": "∇", "hbar": "ℏ", "imath": "ı", "jmath": "ȷ"}

ORDINARY = {
    "infty": "∞", "emptyset": "∅", "varnothing": "∅", "forall": "∀", "exists": "∃", "neg": "¬", "lnot": "¬",
    "prime": "′", "degree": "°", "circ": "∘", "dots": "…", "ldots": "…", "cdots": "⋯", "vdots": "⋮",
    "top": "⊤", "bot": "⊥", "Re": "ℜ", "Im": "ℑ", "aleph": "ℵ", "%": "%", "#": "#", "&": "&", "_": "_",
    "$": "$",
}  # fmt: skip

BINARY = {
    "pm": "±", "mp": "∓", "times": "×", "cdot": "·", "div": "÷", "ast": "∗", "star": "⋆", "cup": "∪",
    "cap": "∩", "setminus": "∖", "wedge": "∧", "land": "∧", "vee": "∨", "lor": "∨", "oplus": "⊕",
    "otimes": "⊗", "bullet": "•",
}  # fmt: skip

RELATIONS = {
    "le": "≤", "leq": "≤", "ge": "≥", "geq": "≥", "ne": "≠", "neq": "≠", "ll": "≪", "gg": "≫", "lt": "<",
    "gt": ">", "approx": "≈", "sim": "∼", "simeq": "≃", "cong": "≅", "equiv": "≡", "propto": "∝", "in": "∈",
    "notin": "∉", "ni": "∋", "subset": "⊂", "subseteq": "⊆", "supset": "⊃", "supseteq": "⊇", "to": "→",
    "rightarrow": "→", "leftarrow": "←", "Rightarrow": "⇒", "Leftrightarrow": "⇔", "iff": "⇔",
    "implies": "⇒", "mapsto": "↦", "mid": "∣", "parallel": "∥", "perp": "⊥", "coloneqq": "≔",
    "uparrow": "↑", "downarrow": "↓", "longrightarrow": "⟶", "colon": ":",
}  # fmt: skip

#: large operators -> (character, limits above and below rather than beside)
LARGE = {
    "sum": ("∑", True), "prod": ("∏", True), "bigcup": ("⋃", True), "bigcap": ("⋂", True),
    "int": ("∫", False), "iint": ("∬", False), "iiint": ("∭", False), "oint": ("∮", False),
}  # fmt: skip

#: functions set upright -> limits below rather than as a subscript
FUNCTIONS = {
    **dict.fromkeys(
        ("sin", "cos", "tan", "cot", "sec", "csc", "arcsin", "arccos", "arctan", "sinh", "cosh", "tanh",
         "coth", "exp", "ln", "log", "lg", "arg", "deg", "dim", "ker", "hom"), False),
    **dict.fromkeys(("min", "max", "inf", "sup", "lim", "det", "gcd", "Pr", "liminf", "limsup"), True),
}  # fmt: skip

#: accents -> the mark set over the letter
ACCENTS = {
    "bar": "¯", "hat": "ˆ", "tilde": "˜", "dot": "˙", "ddot": "¨", "vec": "→", "check": "ˇ", "breve": "˘",
    "acute": "´", "grave": "`", "mathring": "˚",
}  # fmt: skip
LINES = {"overline": "over", "underline": "under", "widehat": "over", "widetilde": "over"}

#: spaces, in em (TeXbook, chapter 18)
SPACES = {
    ",": 3 / 18, "thinspace": 3 / 18, ":": 4 / 18, ">": 4 / 18, "medspace": 4 / 18, ";": 5 / 18,
    "thickspace": 5 / 18,    " ": 0.25, "~": 0.25, "!": -3 / 18, "quad": 1.0, "qquad": 2.0, "enspace": 0.5,
}  # fmt: skip

DELIMITERS = {
    "(": "(", ")": ")", "[": "[", "]": "]", "|": "|", "/": "/", "<": "⟨", ">": "⟩", ".": "",
    "\\{": "{", "\\}": "}", "\\lbrace": "{", "\\rbrace": "}", "\\|": "‖", "\\lvert": "|", "\\rvert": "|",
    "\\vert": "|", "\\Vert": "‖", "\\lVert": "‖", "\\rVert": "‖", "\\langle": "⟨", "\\rangle": "⟩",
    "\\lfloor": "⌊", "\\rfloor": "⌋", "\\lceil": "⌈", "\\rceil": "⌉", "\\lbrack": "[", "\\rbrack": "]",
    "\\backslash": "∖",
}  # fmt: skip
OPENING = frozenset("([{⟨⌊⌈")
CLOSING = frozenset(")]}⟩⌋⌉")

#: \big, \Big, ... -> height in em
SIZES = {
    f"{size}{side}": height
    for size, height in (("big", 1.2), ("Big", 1.8), ("bigg", 2.4), ("Bigg", 3.0))
    for side in ("", "l", "r", "m")
}

#: font macros -> the name that ziamath has for MathML's mathvariant
VARIANTS = {
    "mathrm": "normal", "mathbf": "bold", "boldsymbol": "bold italic", "mathit": "italic",
    "mathcal": "script", "mathscr": "script", "mathbb": "double", "mathfrak": "fraktur", "mathsf": "sans",
    "mathtt": "mono",
}  # fmt: skip
TEXTS = frozenset({"text", "textrm", "textit", "textbf", "operatorname", "mbox"})

#: environments -> (delimiter left, delimiter right, alignment of columns)
ENVIRONMENTS = {
    "cases": ("{", "", "left"), "matrix": ("", "", "center"), "pmatrix": ("(", ")", "center"),
    "bmatrix": ("[", "]", "center"), "vmatrix": ("|", "|", "center"), "Vmatrix": ("‖", "‖", "center"),
    "array": ("", "", "center"),
}  # fmt: skip
#: environments that only stack lines: taken as lines when they are the whole formula
STACKS = frozenset({
    "aligned", "align", "align*", "gather", "gather*", "gathered", "split", "multline", "multline*",
})  # fmt: skip

#: macros without any effect on what is drawn here
IGNORED = frozenset({
    "displaystyle", "textstyle", "limits", "nolimits", "nonumber", "notag", "allowbreak", "left.", "hline",
})  # fmt: skip
