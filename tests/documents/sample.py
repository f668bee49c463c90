"""Documents to be written by every writer: one with all that a tree may hold, one of the size of a real plant."""

from __future__ import annotations

from dataclasses import dataclass
from xml.sax.saxutils import escape, quoteattr

from markov.documents.tree import (
    Column,
    Document,
    Figure,
    Items,
    Paragraph,
    Row,
    Section,
    Span,
    Table,
    Text,
    plain,
)
from markov.output.page_writer import page_bytes
from markov.output.picture import Picture, Shape, Words, rectangle, straight

HOSTILE = {
    "pipe": "pump | spare",
    "tags": "<script>alert('x')</script> & <b>",
    "entities": "&lt; &amp; &#65;",
    "dollar": "cost $x^2$ $",
    "backslash": "\\input{/etc/passwd} \\ ^^M {} }{",
    "percent": "95 % of a_b #1 ~ ^",
    "quotes": "\"double\" 'single' `back` « low „",
    "formula": "=cmd|' /C calc'!A0",
    "typst": '#read("x") *b* _i_ @ref <label> // not a comment ] [ = $a$',
    "newline": "first\nsecond\r\nthird\ttab",
    "control": "bell\x07 null\x00 override\u202e end \ud800",
    "hebrew": "משאבה 3 (ראשית) up",
    "arabic": "مضخة الماء",
    "greek": "λ(αντλία)·2·c̄",
    "cyrillic": "Насос №1 ё",
    "chinese": "冷却水泵",
    "accents": "Kühlung Ångström Łódź ffi Ǆ",
    "signs": "2·λ·(1−c) ≤ 3×10⁻⁷ /h → ∞ ± ½ μ₀ √x ≈ ∑ ‰",
    "long": "very_long_name_" * 13 + "ends",
    "unbroken": "x" * 200,
    "hyphens": "a--b---c ?` !` ,, << >>",
}
"""Names that a format could take for markup, by what is hostile in them."""


@dataclass(frozen=True)
class _Box:
    number: int
    words: str
    x: float
    y: float


def picture(boxes: int = 4) -> Figure:
    """A picture of states in a row, each to be clicked."""
    places = [
        _Box(n, f"{n} up", 20.0 + 90.0 * ((n - 1) % 5), 20.0 + 60.0 * ((n - 1) // 5)) for n in range(1, boxes + 1)
    ]
    width, height = 470.0, 60.0 + 60.0 * ((boxes - 1) // 5)
    marks: list[Shape | Words] = []
    parts = []
    for box in places:
        marks.append(Shape(rectangle(box.x, box.y, 60.0, 30.0), fill="#ffffff", line="#1d2530"))
        marks.append(Words(box.x + 30.0, box.y + 18.0, box.words, 8.0, anchor="middle"))
        parts.append(
            f'<g data-target="state-{box.number}"><path d="M{box.x} {box.y}h60v30h-60z" fill="#fff" stroke="#1d2530"/>'
            f'<text x="{box.x + 30}" y="{box.y + 18}" font-size="8" text-anchor="middle">{escape(box.words)}</text></g>'
        )
    if boxes > 1:
        marks.append(Shape(straight((80.0, 35.0), (110.0, 35.0)), line="#1d2530"))
        parts.append('<path d="M80 35h30" stroke="#1d2530" fill="none"/>')
    alt = 'States & arrows: "all good" <first>'
    svg = (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width}pt" height="{height}pt" viewBox="0 0 {width} {height}"'
        f' role="img" aria-labelledby="t d" font-family={quoteattr("DejaVu Sans, sans-serif")}>\n'
        f'<title id="t">States</title><desc id="d">{escape(alt)}</desc>\n{"".join(parts)}\n</svg>\n'
    )
    drawn = Picture(width, height, tuple(marks), "States", alt)
    return Figure(
        name="states",
        caption="State diagram with names such as a_b & c",
        alt=alt,
        svg=svg,
        png=page_bytes(drawn, "png")[0],
        pdf=page_bytes(drawn, "pdf")[0],
        width_mm=width * 25.4 / 72,
        height_mm=height * 25.4 / 72,
        anchor="diagram",
    )


def wide_picture() -> Figure:
    """A picture that fits A4 sideways only, without parts to click."""
    drawn = Picture(
        720.0,
        200.0,
        (
            Shape(rectangle(1.0, 1.0, 718.0, 198.0), fill="#f3f1e9", line="#1d2530"),
            Words(360.0, 100.0, "a curve over a year", 8.0, anchor="middle"),
        ),
        "Course",
        "A box with words",
    )
    from markov.output.svg_writer import svg_text

    return Figure(
        name="course",
        caption="Unavailability over the year",
        alt="A box with words",
        svg=svg_text(drawn),
        png=page_bytes(drawn, "png")[0],
        pdf=page_bytes(drawn, "pdf")[0],
        width_mm=720 * 25.4 / 72,
        height_mm=200 * 25.4 / 72,
        anchor="course",
    )


def transitions(states: int) -> Table:
    """A transition table of a ring with restoration: two arrows a state."""
    rows = []
    for number in range(1, states + 1):
        following = number % states + 1
        rows.append(_arrow(number, following, "fault of a pump", "2·λ(pump)·c·(1−q)", f"{number}.9e-4"))
        rows.append(_arrow(following, number, "repair by the fitters", "μ(pump)", f"{number * 7}.25"))
    columns = (
        Column("From", "right", 0.5),
        Column("To", "right", 0.5),
        Column("Cause", width=2.0),
        Column("Formula", width=1.6),
        Column("Value", "decimal", 1.0),
        Column("Unit of measure", width=0.8),
        Column("Assumption", width=0.9),
    )
    return Table("transitions", "Transitions, every arrow a row", columns, tuple(rows), anchor="transitions")


def _arrow(source: int, target: int, cause: str, formula: str, value: str) -> Row:
    return Row(
        (
            (Span(str(source), "link", f"state-{source}"),),
            (Span(str(target), "link", f"state-{target}"),),
            plain(cause),
            (Span(formula, "code"),),
            plain(value),
            plain("/h"),
            (Span("", "link", "assumption-2"),),
        )
    )


def states_table(states: int) -> Table:
    """A table with a row for each state, which links may lead to."""
    rows = tuple(
        Row((plain(str(n)), plain(f"{n} of {states} failed"), plain("up" if n < states else "down")), f"state-{n}")
        for n in range(1, states + 1)
    )
    return Table(
        "states", "States", (Column("State", "right", 0.5), Column("What it is", width=3.0), Column("Condition")), rows
    )


def hostile_table() -> Table:
    """A table of all hostile names, in a plain and in a code cell."""
    rows = tuple(Row((plain(key), plain(name), (Span(name, "code"),))) for key, name in HOSTILE.items())
    columns = (
        Column("Kind", width=0.6),
        Column("Name | <plain> & $x$", width=1.5),
        Column("Name as written_%", width=1.5),
    )
    return Table("names", "Names that hold anything: a | b <c> & $d$ \\e %f", columns, rows, anchor="names")


def sample(*, states: int = 4) -> Document:
    """A document with every block, every kind of span, and every hostile name in each place that takes text."""
    verdicts: Text = (
        plain("LOCK-1 is ")[0],
        Span("met", "verdict"),
        Span(", LOCK-2 is "),
        Span("missed", "verdict"),
        Span(", LOCK-3 is "),
        Span("undecided", "verdict"),
        Span(", LOCK-4: "),
        Span("cannot occur", "verdict"),
        Span("."),
    )
    references: Text = (
        Span("See "),
        Span("", "link", "transitions"),
        Span(", "),
        Span("", "link", "diagram"),
        Span(", "),
        Span("", "link", "results"),
        Span(", "),
        Span("the second assumption", "link", "assumption-2"),
        Span(" and "),
        Span("a place that is not there", "link", "nowhere"),
        Span(". The availability is "),
        Span("0.999874485", "strong"),
        Span(" by "),
        Span("gate_drive.failure_rate", "code"),
        Span("."),
    )
    names = tuple(plain(name) for name in HOSTILE.values())
    facts = (
        ("Reference", "HL-07"),
        ("Revision", "B"),
        ("Author", "R. <Miller> & Söhne"),
        ("Spec hash", "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08"),
    )
    return Document(
        "Harbour lock gate drive: 50 % & <more>",
        facts,
        (
            Paragraph(plain("Two drives move the gate; one is in cold standby.")),
            Section(
                "Results",
                (
                    Paragraph(verdicts),
                    Paragraph(references),
                    Paragraph(plain("Systematic faults are not in these numbers. Local codes decide."), note=True),
                    Section("Second _level_ & $more$", (Paragraph(plain("Text.")), states_table(states))),
                ),
                anchor="results",
            ),
            Section(
                "Assumptions",
                (
                    Items(
                        (plain("Failure rates are constant."), plain("Coverage is 1 where unsaid.")),
                        numbered=True,
                        anchors=("assumption-1", "assumption-2"),
                    ),
                    Items(names),
                ),
            ),
            Section("Diagram", (picture(states), wide_picture())),
            Section("Tables", (transitions(states), hostile_table())),
            Section(
                HOSTILE["long"],
                (Section("Deep", (Section("Deeper", (Section("Deepest", (Paragraph(plain("End.")),)),)),)),),
                anchor="last",
            ),
        ),
    )
