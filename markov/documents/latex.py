"""A document as LaTeX fragments, with an example that sets them."""

from __future__ import annotations

import re
from collections.abc import Mapping
from importlib.resources import files

from markov.documents.decimal_points import padding
from markov.documents.latex_characters import ascii_only, latex
from markov.documents.numbering import FIGURE, SECTION, TABLE, Placed, labels, placed, running_head
from markov.documents.pages import drawn_size, stretches
from markov.documents.tree import Document, Figure, Items, Paragraph, Section, Span, Table, Text
from markov.documents.widths import shares
from markov.errors import UsageError

_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9-]*")
_HEADINGS = "ABCDE"
_VERDICT = r"\MarkovVerdict"
_VERDICTS = {"missed": r"\MarkovMissed", "undecided": r"\MarkovUndecided"}


def write_latex(document: Document, *, name: str = "report") -> dict[str, bytes]:
    """Return the files that set `document` with LaTeX, by their names.

    ``NAME.tex`` is whole and compiles as it is; it inputs ``NAME-preamble.tex`` (packages and commands) and
    ``NAME-body.tex``, which takes each table from ``NAME-table-….tex`` and each figure from ``NAME-figure-….pdf``.  A
    document of the user's own inputs the preamble, then the body or single tables.  All sources are ASCII.  Numbers of
    sections, tables and figures are LaTeX's own.

    Parameters
    ----------
    document
        What to write.
    name
        Put before the name of each file and of each label: letters, digits, hyphens.

    Raises
    ------
    UsageError
        A `name` with other characters, an anchor that is used twice, two tables or figures of one name.
    """
    if not _NAME.fullmatch(name):
        raise UsageError(f"name {name!r} for LaTeX files; expected letters, digits and hyphens")
    places = placed(document)
    writer = _Writer(name, labels(places), places)
    body = writer.body(document, places)
    title, reference = running_head(document)
    preamble = files("markov.documents").joinpath("preamble.tex").read_bytes()
    main = _MAIN.replace("NAME", name).replace("HEAD", latex(title)).replace("REFERENCE", latex(reference))
    return {
        f"{name}.tex": main.encode("ascii"),
        f"{name}-preamble.tex": preamble,
        f"{name}-body.tex": body.encode("ascii"),
        **writer.beside,
    }


_MAIN = r"""\documentclass[a4paper,10pt]{article}
\usepackage{iftex}
\ifpdftex
  \usepackage[T1]{fontenc}
  \IfFileExists{lmodern.sty}{\usepackage{lmodern}}{}
  \pdfinfoomitdate=1 \pdfsuppressptexinfo=-1 \pdftrailerid{}
\fi
\usepackage[a4paper,hmargin=16mm,top=18mm,bottom=14mm,headheight=14pt,headsep=5mm]{geometry}
\input{NAME-preamble}
\usepackage[hidelinks]{hyperref}
\pagestyle{myheadings}
\markright{HEAD\hfill REFERENCE\hspace{2em}}
\setlength{\parindent}{0pt}
\setlength{\parskip}{5pt plus 1pt}
\emergencystretch=9em
\begin{document}
\input{NAME-body}
\end{document}
"""


class _Writer:
    """Turns blocks into LaTeX, knowing what each anchor is called; tables and figures become files beside the body."""

    def __init__(self, name: str, called: Mapping[str, str], places: tuple[Placed, ...]) -> None:
        self._name = name
        self._called = called
        self._counted = {
            place.block.anchor: word
            for place in places
            for kind, word in ((Section, SECTION), (Table, TABLE), (Figure, FIGURE))
            if isinstance(place.block, kind) and place.block.anchor
        }
        self.beside: dict[str, bytes] = {}

    def body(self, document: Document, places: tuple[Placed, ...]) -> str:
        """Return the whole text; fills `beside`."""
        lines = [rf"\MarkovTitle{{{latex(document.title)}}}"]
        if document.facts:
            rows = "".join(rf"{latex(label)} & {latex(text)} \\" + "\n" for label, text in document.facts)
            spec = r"@{}l>{\raggedright\arraybackslash}p{0.7\linewidth}@{}"
            lines.append(rf"\noindent\begin{{tabular}}{{{spec}}}\toprule" + f"\n{rows}" + r"\bottomrule\end{tabular}")
        if any(isinstance(place.block, Section) for place in places):
            lines.append(r"\setcounter{tocdepth}{2}\tableofcontents")
        for stretch in stretches(places):
            blocks = [self.block(place) for place in stretch.places]
            lines.extend([r"\begin{landscape}", *blocks, r"\end{landscape}"] if stretch.sideways else blocks)
        return "\n\n".join(lines) + "\n"

    def block(self, place: Placed) -> str:
        block = place.block
        if isinstance(block, Section):
            command = _HEADINGS[min(place.level, len(_HEADINGS)) - 1]
            heading = rf"\texorpdfstring{{{latex(block.heading)}}}{{{ascii_only(block.heading)}}}"
            return rf"\MarkovHeading{command}{{{heading}}}{self._label(block.anchor)}"
        if isinstance(block, Paragraph):
            text = self.text(block.text)
            return rf"\MarkovCaution{{{text}}}" if block.note else text
        if isinstance(block, Items):
            return self._items(block)
        if isinstance(block, Table):
            self._add(f"{self._name}-table-{block.name}.tex", self._table(block).encode("ascii"))
            return rf"\input{{\MarkovFolder {self._name}-table-{block.name}}}"
        return self._figure(block)

    def _add(self, file: str, content: bytes) -> None:
        if file in self.beside or not _NAME.fullmatch(file.rpartition(".")[0]):
            raise UsageError(
                f"{file}: a table or figure by a name that is taken or holds more than letters, digits, hyphens"
            )
        self.beside[file] = content

    def _items(self, block: Items) -> str:
        anchors = (*block.anchors, *[""] * (len(block.items) - len(block.anchors)))
        kind = "enumerate" if block.numbered else "itemize"
        items = "\n".join(
            rf"\item {self._spot(anchor)}{self.text(item)}" for item, anchor in zip(block.items, anchors, strict=True)
        )
        return rf"\begin{{{kind}}}" + f"\n{items}\n" + rf"\end{{{kind}}}"

    def _table(self, block: Table) -> str:
        gaps = 2 * len(block.columns) - 2
        columns = "\n  ".join(
            rf">{{\{'raggedleft' if column.align == 'right' else 'raggedright'}\arraybackslash}}"
            rf"p{{{share:.4f}\dimexpr\linewidth-{gaps}\tabcolsep\relax}}"
            for column, share in zip(block.columns, shares(block), strict=True)
        )
        headings = " & ".join(rf"{{\bfseries {latex(column.heading)}}}" for column in block.columns)
        rows = []
        for row, pads in zip(block.rows, padding(block), strict=True):
            cells = [r"\MarkovDigit{}" * pad + self.text(cell) for cell, pad in zip(row.cells, pads, strict=True)]
            rows.append(self._spot(row.anchor) + " & ".join(cells) + r" \\[1.5pt]")
        return "\n".join(
            [
                rf"{{\footnotesize\setlength{{\tabcolsep}}{{4pt}}\begin{{longtable}}{{@{{}}{columns}@{{}}}}",
                rf"\caption{{{latex(block.caption)}}}{self._label(block.anchor)}\\",
                rf"\toprule {headings} \\ \midrule\endfirsthead",
                rf"\toprule {headings} \\ \midrule\endhead",
                r"\bottomrule\endfoot",
                *rows,
                r"\end{longtable}}",
                "",
            ]
        )

    def _figure(self, block: Figure) -> str:
        file = f"{self._name}-figure-{block.name}.pdf"
        self._add(file, block.pdf)
        width, _ = drawn_size(block)
        picture = rf"\MarkovPicture{{{width:.2f}mm}}{{{ascii_only(block.alt)}}}{{{file}}}"
        caption = (
            rf"\captionsetup{{hypcap=false}}\captionof{{figure}}{{{latex(block.caption)}}}{self._label(block.anchor)}"
        )
        return rf"\begin{{center}}{picture}{caption}\end{{center}}"

    def _label(self, anchor: str) -> str:
        return rf"\label{{{self._name}:{anchor}}}" if anchor else ""

    def _spot(self, anchor: str) -> str:
        return rf"\hypertarget{{{self._name}:{anchor}}}{{}}" if anchor else ""

    def text(self, text: Text) -> str:
        return "".join(map(self._span, text))

    def _span(self, span: Span) -> str:
        if span.kind == "link":
            return self._link(span)
        words = latex(span.text)
        if span.kind == "strong":
            return rf"\textbf{{{words}}}"
        if span.kind == "code":
            return rf"\MarkovCode{{{words}}}"
        if span.kind == "verdict":
            return f"{_VERDICTS.get(span.text, _VERDICT)}{{{words}}}"
        return words

    def _link(self, span: Span) -> str:
        if span.target not in self._called:
            return latex(span.text)
        where = f"{self._name}:{span.target}"
        if span.target in self._counted:
            number = rf"{self._counted[span.target]}~\ref{{{where}}}"
            return rf"\hyperref[{where}]{{{latex(span.text)}}}" if span.text else number
        return rf"\hyperlink{{{where}}}{{{latex(span.text or self._called[span.target])}}}"
