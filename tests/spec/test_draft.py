"""The first spec is in order and explains itself."""

from markov import spec


def test_draft_is_in_order(read):
    model = read(spec.draft_text())
    assert model.warnings == ()
    assert len(model.targets) == 3


def test_draft_has_a_comment_for_each_part():
    lines = spec.draft_text().splitlines()
    for key in ("parameters:", "units:", "groups:", "crews:", "system:", "targets:"):
        at = next(number for number, line in enumerate(lines) if line.startswith(key))
        assert lines[at - 1].startswith("#")
    assert max(map(len, lines)) <= 120
