"""Of YAML only the shape is used; its traps are refused, and its mistakes are told with their place."""

import pytest
import yaml

from markov import spec
from markov.errors import SpecError, UsageError

PLANT = "units: {lamp: {failure_rate: 1e-5 /h}}\nsystem: lamp\n"


@pytest.mark.parametrize(
    "name", ["on", "off", "no", "yes", "y", "1", "1e6", "0x10", "null", "~", "true", "1:30", "007"]
)
def test_names_keep_their_spelling(read, name):
    model = read(f"units: {{{name}: {{failure_rate: 1e-5 /h}}}}\nsystem: {name}\n")
    assert list(model.units) == [name]
    assert model.named_in_system == (name,)


def test_names_may_hold_signs_of_other_formats(read):
    name = 'a|b <c> & "d" =1+1 \\alpha_{1}$ %'
    assert list(read(f"units:\n  '{name}': {{failure_rate: 1e-5 /h}}\nsystem: '{name}'\n").units) == [name]


def test_text_that_looks_like_something_else_stays_text(read):
    model = read(f"title: 2024-01-01\nnotes: no\nreference: {{revision: 1.10, document: 007}}\n{PLANT}")
    assert (model.title, model.notes) == ("2024-01-01", "no")
    assert model.reference == {"revision": "1.10", "document": "007"}


@pytest.mark.parametrize("number", ["1e-6", "1E-6", "1.0e-6", "0.000_001", "'1e-6'"])
def test_numbers_are_read_as_written(read, number):
    assert (
        read(f"units: {{lamp: {{failure_rate: {number} /h}}}}\nsystem: lamp\n".replace("' /h", " /h'"))
        .units["lamp"]
        .failure_hourly
        * 10**6
        == 1
    )


def test_duplicate_keys_are_refused_at_every_level(problems):
    text = (
        "units:\n  lamp: {failure_rate: 1 /y, failure_rate: 2 /y}\n  fan: {failure_rate: 1 /y}\n"
        "  lamp: {failure_rate: 3 /y}\nsystem: lamp\nsystem: fan\n"
    )
    told = problems(text)
    assert [(each.line, each.column) for each in told] == [(2, 30), (4, 3), (6, 1)]
    assert all("stands twice" in each.found for each in told)
    assert "first on line 5" in told[2].found


@pytest.mark.parametrize("tag", ["!!python/object:os.system ", "!!int ", "!!binary ", "!unit ", "!!float "])
def test_tags_are_refused(told, tag):
    problem = told(f"title: {tag}abc\n{PLANT}")
    assert "tag" in problem.found
    assert problem.line == 1


def test_plain_tag_is_harmless(read):
    assert read(f"title: !!str 12\n{PLANT}").title == "12"


def test_anchors_are_unfolded(read):
    text = "units:\n  a: &kind {failure_rate: 1 /y, repair_time: 3 h}\n  b: *kind\nsystem: {all_of: [a, b]}\n"
    model = read(text)
    assert model.units["a"] == model.units["b"]


def test_problem_behind_an_alias_is_told_where_it_stands(problems):
    text = "units:\n  a: &kind {failure_rate: 1}\n  b: *kind\nsystem: {all_of: [a, b]}\n"
    assert [(each.line, each.column) for each in problems(text)] == [(2, 27), (2, 27)]


def test_alias_bomb_is_refused(told):
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{n + 1}: &a{n + 1} [{', '.join([f'*a{n}'] * 10)}]" for n in range(9)]
    assert "too many keys and values" in told("\n".join(lines)).found


def test_nested_alias_bomb_is_refused(told):
    lines = ["a0: &a0 [x]"] + [f"a{n + 1}: &a{n + 1} [[[[*a{n}]]]]" for n in range(12)]
    assert "nested too deep" in told("\n".join(lines)).found


def test_anchor_that_holds_itself_is_refused(told):
    assert "holds itself" in told("system: &a {all_of: [*a]}\n").found


def test_alias_without_anchor_is_refused(problems):
    assert any("*lost" in each.found for each in problems(f"title: *lost\n{PLANT}"))


@pytest.mark.parametrize("text", ["[" * 100_000, "{a: " * 50_000, "- " * 50_000, "a: &x [*x, " * 5000])
def test_deep_nesting_is_refused(problems, text):
    assert problems(text)


def test_large_file_is_refused(told):
    problem = told("# " + "x" * 10_000_000)
    assert "more than 4 MB" in problem.found


def test_very_many_values_are_refused(told):
    assert "too many keys and values" in told("system: [" + "a," * 500_000 + "]").found


@pytest.mark.parametrize(
    ("text", "line", "column", "found"),
    [
        ("title: a: b\n", 1, 9, "colon"),
        ("units:\n\tlamp: 1\n", 2, 1, "a tab"),
        ("title: 'open\nsystem: x\n", 3, 1, "quotation mark that is not closed"),
        ("units: {a: {failure_rate: 1 /y}\nsystem: a\n", 2, 1, "bracket"),
        ("units:\n  a: {failure_rate: 1 /y}\n b: 1\n", 3, 2, "does not fit"),
        ("title: @home\n", 1, 8, "begins with `@`"),
        ('title: "\\q"\n', 1, 9, "escape"),
        ("title: &\n", 1, 9, "without a name"),
        ("", 1, 1, "empty"),
        ("# only a comment\n", 1, 1, "empty"),
        ("- a\n- b\n", 1, 1, "no mapping"),
        ("just text\n", 1, 1, "no mapping"),
    ],
)
def test_what_is_no_yaml_is_told_with_its_place(told, text, line, column, found):
    problem = told(text)
    assert (problem.line, problem.column) == (line, column)
    assert found in problem.found


def test_second_document_is_refused(told):
    problem = told(f"{PLANT}---\n{PLANT}")
    assert "second document" in problem.found
    assert problem.line == 3


def test_single_document_may_have_its_marks(read):
    assert read(f"%YAML 1.1\n---\n{PLANT}...\n").named_in_system == ("lamp",)


def test_merge_key_is_refused(problems):
    text = "units:\n  a: &k {failure_rate: 1 /y}\n  b: {<<: *k}\nsystem: a\n"
    assert any("merge key" in each.found and (each.line, each.column) == (3, 7) for each in problems(text))


@pytest.mark.parametrize("key", ["? [a, b]\n: 1\n", "? {a: b}\n: 1\n", "'': 1\n", "' ': 1\n"])
def test_odd_keys_are_refused(told, key):
    assert "key" in told(PLANT + key).found


@pytest.mark.parametrize(
    ("data", "found"),
    [
        ("title: caf\u00e9\n".encode("latin-1"), "0xe9"),
        ("title: a\n".encode("utf-16"), "UTF-16"),
        (b"title: \x00\n", "U+0000"),
        (b"title: \x1b[31m\n", "U+001B"),
        (b"\xff\xfe\x00", "UTF-16"),
        (b"title: \xed\xa0\x80", "not UTF-8"),
    ],
)
def test_other_encodings_are_refused(data, found):
    with pytest.raises(SpecError) as caught:
        spec.read_bytes(data, "f.yaml")
    (problem,) = caught.value.problems
    assert found in problem.found
    assert (problem.file, problem.line) == ("f.yaml", 1)


def test_byte_order_mark_and_line_ends_do_not_matter(read):
    with_mark = spec.read_bytes(b"\xef\xbb\xbf" + PLANT.replace("\n", "\r\n").encode(), "f")
    assert with_mark.units == read(PLANT).units


def test_escape_that_is_no_character_is_refused(problems):
    assert problems(f'title: "\\ud800"\n{PLANT}')
    assert problems(f'title: "\\U00110000"\n{PLANT}')


def test_file_is_read_by_its_path(tmp_path):
    path = tmp_path / "plant.yaml"
    path.write_text(PLANT)
    model = spec.read(path)
    assert model.source_name == str(path)
    path.write_text("units: 1")
    with pytest.raises(SpecError, match=r"plant\.yaml:1:8: "):
        spec.read(path)


def test_standard_input_is_read(monkeypatch):
    import io
    import sys

    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(PLANT.encode())))
    assert spec.read("-").source_name == "<stdin>"


def test_missing_file_is_a_fault_of_the_call(tmp_path):
    with pytest.raises(UsageError, match="cannot read the spec"):
        spec.read(tmp_path / "missing.yaml")
    with pytest.raises(UsageError):
        spec.read(tmp_path)
    with pytest.raises(UsageError):
        spec.read("a\0b")


@pytest.mark.parametrize(
    "text", ["[" * 5000, "a: &x [*x]", "units:\n\tlamp: 1\n", "title: 'open\n", "title: @x", "a: b: c"]
)
def test_parser_in_plain_python_tells_the_same_kind_of_problem(monkeypatch, problems, text):
    usual = problems(text)
    monkeypatch.setattr("markov.spec.tree._Loader", yaml.SafeLoader)
    assert [each.line for each in problems(text)] == [each.line for each in usual]
    assert spec.read_text(PLANT).named_in_system == ("lamp",)
