r"""Any text as LaTeX source that consists of ASCII alone.

Letters with accents become accent commands, Greek letters and signs become mathematics, whatever TeX spells otherwise
(dashes, quotation marks, ligatures) is taken apart.  What is left becomes ``\MarkovOther{4E2D}``, which the preamble
sets in a font that has the character, or shows by its number.
"""

from __future__ import annotations

import unicodedata

from markov.documents.breaking import pieces
from markov.documents.direction import runs
from markov.output.lettering import legible

_SPECIAL = {
    "\\": r"\textbackslash{}",
    "{": r"\{",
    "}": r"\}",
    "$": r"\$",
    "&": r"\&",
    "#": r"\#",
    "%": r"\%",
    "_": r"\_",
    "~": r"\textasciitilde{}",
    "^": r"\textasciicircum{}",
    '"': r"\textquotedbl{}",
    "'": r"\textquotesingle{}",
    "`": r"\textasciigrave{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    "[": "{[}",  # in braces, or it would be read as an argument at the start of a row, as would the next two
    "]": "{]}",
    "*": "{*}",
    "\u00a0": "~",
    "\u00ad": "",
}
_TEXT = {
    "ß": r"\ss{}", "æ": r"\ae{}", "Æ": r"\AE{}", "œ": r"\oe{}", "Œ": r"\OE{}", "ø": r"\o{}", "Ø": r"\O{}",
    "ł": r"\l{}", "Ł": r"\L{}", "đ": r"\dj{}", "Đ": r"\DJ{}", "ð": r"\dh{}", "Ð": r"\DH{}", "þ": r"\th{}",
    "Þ": r"\TH{}", "ı": r"\i{}", "ŋ": r"\ng{}", "Ŋ": r"\NG{}", "§": r"\S{}", "¶": r"\P{}", "©": r"\textcopyright{}",
    "®": r"\textregistered{}", "™": r"\texttrademark{}", "°": r"\textdegree{}", "‰": r"\textperthousand{}",
    "€": r"\texteuro{}", "£": r"\pounds{}", "–": r"\textendash{}", "—": r"\textemdash{}", "…": r"\textellipsis{}",
    "‘": r"\textquoteleft{}", "’": r"\textquoteright{}", "“": r"\textquotedblleft{}", "”": r"\textquotedblright{}",
    "„": r"\quotedblbase{}", "‚": r"\quotesinglbase{}", "«": r"\guillemotleft{}", "»": r"\guillemotright{}",
    "‹": r"\guilsinglleft{}", "›": r"\guilsinglright{}", "•": r"\textbullet{}", "½": r"\textonehalf{}",
    "¼": r"\textonequarter{}", "¾": r"\textthreequarters{}", "№": r"No.", "¿": r"\textquestiondown{}",
    "¡": r"\textexclamdown{}", "‐": "-", "‑": r"\mbox{-}",
}  # fmt: skip
_SIGNS = {
    "·": r"\cdot", "×": r"\times", "÷": r"\div", "−": "-", "±": r"\pm", "∓": r"\mp", "≤": r"\leq", "≥": r"\geq",
    "≪": r"\ll", "≫": r"\gg", "≈": r"\approx", "≠": r"\neq", "≡": r"\equiv", "∝": r"\propto", "∞": r"\infty",
    "→": r"\rightarrow", "←": r"\leftarrow", "↔": r"\leftrightarrow", "↑": r"\uparrow", "↓": r"\downarrow",
    "⇒": r"\Rightarrow", "⇐": r"\Leftarrow", "⇔": r"\Leftrightarrow", "↵": r"\hookleftarrow", "√": r"\surd",
    "∑": r"\textstyle\sum", "∏": r"\textstyle\prod", "∫": r"\textstyle\int", "∂": r"\partial", "∇": r"\nabla",
    "∆": r"\Delta", "∈": r"\in", "∉": r"\notin", "⊂": r"\subset", "⊆": r"\subseteq", "∩": r"\cap", "∪": r"\cup",
    "∧": r"\wedge", "∨": r"\vee", "¬": r"\neg", "∅": r"\emptyset", "∀": r"\forall", "∃": r"\exists", "⟨": r"\langle",
    "⟩": r"\rangle", "′": r"^{\prime}", "″": r"^{\prime\prime}", "µ": r"\mu", "Ω": r"\Omega", "∘": r"\circ",
    "⋅": r"\cdot", "∙": r"\cdot", "≲": r"\lesssim", "≳": r"\gtrsim",
}  # fmt: skip
_GREEK = {
    "α": r"\alpha", "β": r"\beta", "γ": r"\gamma", "δ": r"\delta", "ε": r"\varepsilon", "ζ": r"\zeta", "η": r"\eta",
    "θ": r"\theta", "ι": r"\iota", "κ": r"\kappa", "λ": r"\lambda", "μ": r"\mu", "ν": r"\nu", "ξ": r"\xi", "ο": "o",
    "π": r"\pi", "ρ": r"\rho", "ς": r"\varsigma", "σ": r"\sigma", "τ": r"\tau", "υ": r"\upsilon", "φ": r"\varphi",
    "χ": r"\chi", "ψ": r"\psi", "ω": r"\omega", "ϵ": r"\epsilon", "ϑ": r"\vartheta", "ϕ": r"\phi", "ϱ": r"\varrho",
    "Α": r"\mathrm{A}", "Β": r"\mathrm{B}", "Γ": r"\Gamma", "Δ": r"\Delta", "Ε": r"\mathrm{E}", "Ζ": r"\mathrm{Z}",
    "Η": r"\mathrm{H}", "Θ": r"\Theta", "Ι": r"\mathrm{I}", "Κ": r"\mathrm{K}", "Λ": r"\Lambda", "Μ": r"\mathrm{M}",
    "Ν": r"\mathrm{N}", "Ξ": r"\Xi", "Ο": r"\mathrm{O}", "Π": r"\Pi", "Ρ": r"\mathrm{P}", "Σ": r"\Sigma",
    "Τ": r"\mathrm{T}", "Υ": r"\Upsilon", "Φ": r"\Phi", "Χ": r"\mathrm{X}", "Ψ": r"\Psi", "Ω": r"\Omega",
}  # fmt: skip
_ACCENTS = {
    "\u0300": (r"\`", r"\grave"), "\u0301": (r"\'", r"\acute"), "\u0302": (r"\^", r"\hat"),
    "\u0303": (r"\~", r"\tilde"), "\u0304": (r"\=", r"\bar"), "\u0306": (r"\u", r"\breve"),
    "\u0307": (r"\.", r"\dot"), "\u0308": (r"\"", r"\ddot"), "\u030a": (r"\r", r"\mathring"),
    "\u030b": (r"\H", ""), "\u030c": (r"\v", r"\check"), "\u0323": (r"\d", ""), "\u0327": (r"\c", ""),
    "\u0328": (r"\k", ""), "\u0331": (r"\b", ""), "\u0305": (r"\=", r"\bar"),
}  # fmt: skip
_JOINING = frozenset("-,<>'`!?")
"""Signs that fonts of TeX join with a neighbour, such as two hyphens into a dash."""
_APART = r"{\kern0pt}"
_MIRRORED = dict(zip("()[]{}<>«»", ")(][}{><»«", strict=True))
_RAISED = dict(zip("⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻⁼⁽⁾ⁿ", "0123456789+-=()n", strict=True))
_LOWERED = dict(zip("₀₁₂₃₄₅₆₇₈₉₊₋₌₍₎", "0123456789+-=()", strict=True))


def latex(text: str) -> str:
    """Return `text` as LaTeX source in ASCII; lines may break within long words."""
    parts = []
    for run, right_to_left in runs(legible(text)):
        if right_to_left:
            font = r"\MarkovArabic " if any("ARABIC" in unicodedata.name(c, "") for c in run) else ""
            parts.append(rf"\MarkovLeftward{{{font}{_mirroring(run)}}}")
        else:
            parts.append(r"\MarkovBreak{}".join(_escaped(piece) for piece in pieces(run)))
    return "".join(parts)


def ascii_only(text: str) -> str:
    """Return `text` for the bookmarks of a PDF: letters without accents, nothing that TeX acts upon."""
    plain = unicodedata.normalize("NFKD", legible(text))
    return "".join(
        character if character.isascii() and (character.isalnum() or character in " .:;()/+=!?@") else "-"
        for character in plain
        if not unicodedata.combining(character)
    )


def _escaped(text: str) -> str:
    parts: list[str] = []
    before = ""
    for cluster in _clusters(text):
        if cluster in _JOINING and before in _JOINING:
            parts.append(_APART)
        parts.append(_cluster(cluster))
        before = cluster
    return "".join(parts)


def _mirroring(run: str) -> str:
    """Return a part from right to left; not every TeX turns its brackets around by itself."""
    return "".join(
        rf"\MarkovMirror{{{_escaped(cluster)}}}{{{_escaped(_MIRRORED[cluster])}}}"
        if cluster in _MIRRORED
        else _cluster(cluster)
        for cluster in _clusters(run)
    )


def _clusters(text: str) -> list[str]:
    """Return the letters of `text`, each with the marks that belong to it."""
    found: list[str] = []
    for character in text:
        if found and unicodedata.combining(character):
            found[-1] += character
        else:
            found.append(character)
    return found


def _cluster(cluster: str) -> str:
    if len(cluster) == 1 and (known := _known(cluster)) is not None:
        return known
    apart = unicodedata.normalize("NFD", cluster)
    base, marks = apart[0], apart[1:]
    if marks and all(mark in _ACCENTS for mark in marks):
        if base in _GREEK and all(_ACCENTS[mark][1] for mark in marks):
            inner = _GREEK[base]
            for mark in marks:
                inner = f"{_ACCENTS[mark][1]}{{{inner}}}"
            return rf"\ensuremath{{{inner}}}"
        if base.isascii() and base.isalpha():
            above = all(unicodedata.combining(mark) == 230 for mark in marks)
            inner = {"i": r"\i", "j": r"\j"}.get(base, base) if above else base
            for mark in marks:
                inner = f"{_ACCENTS[mark][0]}{{{inner}}}"
            return f"{{{inner}}}"
    compatible = unicodedata.normalize("NFKD", cluster)
    if compatible != unicodedata.normalize("NFD", cluster) and compatible[0].isascii():
        return _escaped(unicodedata.normalize("NFC", compatible))
    broken = r"\MarkovBreak{}" if unicodedata.east_asian_width(cluster[0]) in "WF" else ""
    return broken + "".join(rf"\MarkovOther{{{ord(character):04X}}}" for character in cluster)


def _known(character: str) -> str | None:
    """Return the source of a character that has one of its own."""
    if character in _SPECIAL:
        return _SPECIAL[character]
    if character.isascii():
        return character
    if character in _TEXT:
        return _TEXT[character]
    if character in _SIGNS:
        return rf"\ensuremath{{{_SIGNS[character]}}}"
    if character in _GREEK:
        return rf"\ensuremath{{{_GREEK[character]}}}"
    if character in _RAISED:
        return rf"\ensuremath{{^{{{_RAISED[character]}}}}}"
    if character in _LOWERED:
        return rf"\ensuremath{{_{{{_LOWERED[character]}}}}}"
    return None
