"""The LaTeX fragments: ASCII sources in which no name is a command."""

import dataclasses
import re

import pytest

from markov.documents.latex import write_latex
from markov.documents.latex_characters import latex
from markov.documents.tree import Document, Section
from markov.errors import UsageError
from tests.documents.sample import HOSTILE, picture, sample, transitions

COMMAND = re.compile(r"\\([A-Za-z]+|.)", re.DOTALL)
KNOWN = {
    *("textbackslash", "textasciitilde", "textasciicircum", "textquotedbl", "textquotesingle", "textasciigrave"),
    *("textless", "textgreater", "textbar", "textonehalf", "textperthousand", "guillemotleft", "quotedblbase"),
    *("{", "}", "$", "&", "#", "%", "_", "=", "r", "'", '"', "L", "v", "H"),
    *("ensuremath", "hookleftarrow", "lambda", "alpha", "nu", "tau", "acute", "iota", "cdot", "leq", "times", "mu"),
    *("rightarrow", "infty", "pm", "surd", "approx", "textstyle", "sum", "kern"),
    *("MarkovOther", "MarkovBreak", "MarkovLeftward", "MarkovArabic", "MarkovMirror"),
}
"""Every command that an escaped name of the tests may hold: none does anything but set letters and signs."""


@pytest.fixture(scope="module")
def files() -> dict[str, bytes]:
    return write_latex(sample(states=6))


def test_files_are_fragments_and_an_example_that_sets_them(files: dict[str, bytes]) -> None:
    assert list(files) == [
        "report.tex",
        "report-preamble.tex",
        "report-body.tex",
        "report-table-states.tex",
        "report-figure-states.pdf",
        "report-figure-course.pdf",
        "report-table-transitions.tex",
        "report-table-names.tex",
    ]
    assert files["report-figure-states.pdf"] == picture(6).pdf
    body = files["report-body.tex"].decode()
    inputs = re.findall(r"\\input\{\\MarkovFolder ([^}]*)\}", body)
    assert [f"{name}.tex" for name in inputs] == [name for name in files if "-table-" in name]
    pictures = re.findall(r"\{(report-figure-[^}]*)\}", body)
    assert pictures == [name for name in files if "-figure-" in name]


def test_every_source_is_ascii_with_braces_in_pairs(files: dict[str, bytes]) -> None:
    for name, content in files.items():
        if name.endswith(".tex"):
            text = re.sub(r"(?<!\\)%.*", "", content.decode("ascii"))
            plain = re.sub(r"\\[{}]", "", text)
            assert plain.count("{") == plain.count("}"), name


@pytest.mark.parametrize("kind", HOSTILE)
def test_a_name_holds_no_command_but_letters_and_signs(kind: str) -> None:
    source = latex(HOSTILE[kind])
    assert source.isascii()
    assert set(COMMAND.findall(source)) <= KNOWN
    bare = COMMAND.sub("", source)
    assert not set("$&#%\\\"'`|<>\n\r") & set(bare)
    assert bare.count("{") == bare.count("}")
    outside_mathematics = re.sub(r"\\ensuremath\{(?:[^{}]|\{[^{}]*\})*\}", "", source)
    assert not set("^_~") & set(COMMAND.sub("", outside_mathematics))


@pytest.mark.parametrize(
    ("text", "source"),
    [
        (r"\input{x}", r"\textbackslash{}input\{x\}"),
        ("a_b & 5 %", r"a\_b \& 5 \%"),
        ("#1 $x^2$ ~", r"\#1 \$x\textasciicircum{}2\$ \textasciitilde{}"),
        ("λ·c", r"\ensuremath{\lambda}\ensuremath{\cdot}c"),
        ("ί", r"\ensuremath{\acute{\iota}}"),
        ("10⁻⁷", r"10\ensuremath{^{-}}\ensuremath{^{7}}"),
        ("µ₀", r"\ensuremath{\mu}\ensuremath{_{0}}"),
        ("Łódź", r"\L{}{\'{o}}d{\'{z}}"),
        ("ï", r"{\"{\i}}"),
        ("ç", r"{\c{c}}"),
        ("c̄", r"{\={c}}"),
        ("ﬃ", "ffi"),
        ("a--b", r"a-{\kern0pt}-b"),
        ("[a]*", "{[}a{]}{*}"),
        ("冷", r"\MarkovBreak{}\MarkovOther{51B7}"),
        ("Н", r"\MarkovOther{041D}"),
        ("א(ב)", r"\MarkovLeftward{\MarkovOther{05D0}\MarkovMirror{(}{)}\MarkovOther{05D1}\MarkovMirror{)}{(}}"),
        ("م", r"\MarkovLeftward{\MarkovArabic \MarkovOther{0645}}"),
        ("a\nb", r"a\ensuremath{\hookleftarrow}b"),
        ("", ""),
    ],
)
def test_characters_become_what_latex_calls_them(text: str, source: str) -> None:
    assert latex(text) == source


def test_every_greek_letter_has_a_name() -> None:
    greek = [chr(code) for code in (*range(0x391, 0x3AA), *range(0x3B1, 0x3CA)) if code != 0x3A2]
    assert len(greek) == 49
    assert not [letter for letter in greek if "MarkovOther" in latex(letter)]


def test_long_words_may_break(files: dict[str, bytes]) -> None:
    assert latex(HOSTILE["unbroken"]).count(r"\MarkovBreak{}") >= 10
    assert r"\MarkovBreak" not in latex("short_name 0.999874485")


def test_tables_are_long_ones_with_rules_and_repeated_headings(files: dict[str, bytes]) -> None:
    table = files["report-table-transitions.tex"].decode()
    for command in (r"\begin{longtable}", r"\caption{", r"\toprule", r"\midrule\endhead", r"\bottomrule\endfoot"):
        assert command in table
    assert len(re.findall(r"p\{", table)) == 7
    shares = [float(share) for share in re.findall(r"p\{([\d.]+)\\dimexpr", table)]
    assert sum(shares) == pytest.approx(1.0, abs=1e-3)
    rows = [line for line in table.splitlines() if line.endswith(r" \\[1.5pt]") and r"\hyperlink" in line]
    assert len(rows) == len(transitions(6).rows)
    assert all(line.count(" & ") == 6 for line in rows)


def test_every_reference_has_its_label(files: dict[str, bytes]) -> None:
    text = b"".join(content for name, content in files.items() if name.endswith(".tex")).decode()
    labels = re.findall(r"\\label\{([^}]*)\}", text)
    targets = re.findall(r"\\hypertarget\{([^}]*)\}", text)
    assert len(labels) == len(set(labels))
    assert len(targets) == len(set(targets))
    assert set(re.findall(r"\\(?:ref\{|hyperref\[)([^}\]]*)", text)) <= set(labels)
    assert set(re.findall(r"\\hyperlink\{([^}]*)\}", text)) <= set(targets)
    assert r"Table~\ref{report:transitions}" in text


def test_another_name_keeps_two_reports_apart() -> None:
    files = write_latex(sample(), name="lock-B")
    assert all(name.startswith("lock-B") for name in files)
    assert b"report:" not in b"".join(content for name, content in files.items() if name.endswith(".tex"))


@pytest.mark.parametrize("name", ["", "../up", "a b", "x_y", "é", "a}"])
def test_a_name_that_could_lead_elsewhere_is_refused(name: str) -> None:
    with pytest.raises(UsageError, match="letters, digits and hyphens"):
        write_latex(sample(), name=name)


def test_two_tables_of_one_name_are_refused() -> None:
    one = dataclasses.replace(transitions(2), anchor="")
    with pytest.raises(UsageError, match="taken"):
        write_latex(Document("Title", (), (one, one)))


def test_headings_are_commands_that_a_host_document_may_redefine(files: dict[str, bytes]) -> None:
    body = files["report-body.tex"].decode()
    assert r"\MarkovHeadingA{\texorpdfstring{Results}{Results}}\label{report:results}" in body
    deep = Document(
        "T",
        (),
        (Section("1", (Section("2", (Section("3", (Section("4", (Section("5", (Section("6", ()),)),)),)),)),)),),
    )
    assert re.findall(r"MarkovHeading(\w)", write_latex(deep)["report-body.tex"].decode()) == list("ABCDEE")


def test_the_same_document_gives_the_same_bytes(files: dict[str, bytes]) -> None:
    assert write_latex(sample(states=6)) == files
