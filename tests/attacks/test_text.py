"""What an assessor writes into a spec to see it refused, or read as meant: through the whole program."""

import pytest

from tests.cli.program import Program

LAMP = "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\nsystem: lamp\nmission: {time: 100 h}\n"


def lamp(**keys: str) -> str:
    said = {"failure_rate": "1e-3 /h", "repair_time": "10 h", **keys}
    return (
        f"units: {{lamp: {{{', '.join(f'{key}: {value}' for key, value in said.items() if value)}}}}}\nsystem: lamp\n"
    )


# --- attack 1: a name used twice, a duplicate key


@pytest.mark.parametrize(
    ("text", "place", "word"),
    [
        (LAMP + "system: lamp\n", "4:1", "system"),
        ("units:\n  a: {failure_rate: 1 /y}\n  a: {failure_rate: 2 /y}\nsystem: a\n", "3:3", "a"),
        ("units: {a: {failure_rate: 1 /y, failure_rate: 1 /y}}\nsystem: a\n", "1:33", "failure_rate"),
        ("units: {a: {failure_rate: 1 /y}}\ngroups: {a: {members: [a]}}\nsystem: a\n", "2:10", "a"),
        (
            "units: {a: {failure_rate: 1 /y}}\ngroups: {g: {members: [a, a], redundancy: active}}\nsystem: g\n",
            "2:27",
            "a",
        ),
        (
            LAMP + "targets:\n  - {id: T, measure: unreliability, at_most: 1 %}\n"
            "  - {id: T, measure: unreliability, at_most: 2 %}\n",
            "6:10",
            "T",
        ),
    ],
    ids=["top key", "unit", "key of a unit", "unit and group", "member", "target"],
)
def test_a_name_twice_is_refused_at_its_second_place(program: Program, text: str, place: str, word: str) -> None:
    (line,) = program.refused(text)
    assert f"plant.yaml:{place}: " in line
    assert f"`{word}`" in line


# --- attack 2: a misspelt key


@pytest.mark.parametrize(
    ("text", "meant"),
    [
        (LAMP.replace("failure_rate", "failure_rte"), "failure_rate"),
        (LAMP.replace("repair_time", "repiar_time"), "repair_time"),
        (LAMP.replace("mission", "misson"), "mission"),
        (LAMP + "targets: [{id: T, measure: relaibility, at_least: 0.9}]\n", "reliability"),
        (LAMP.replace("system: lamp", "system: lmap"), "lamp"),
    ],
)
def test_a_misspelt_word_is_refused_with_the_word_that_is_meant(program: Program, text: str, meant: str) -> None:
    (line,) = program.refused(text)
    assert f"write `{meant}`" in line


# --- attack 3: numbers and words that YAML reads in its own way


@pytest.mark.parametrize(
    ("written", "meant"),
    [
        ("1e-3 /h", "0.001 /h"),
        ("1E-3 /h", "0.001 /h"),
        ("1_000 per million hours", "0.001 /h"),
        (".001 /h", "0.001 /h"),
    ],
)
def test_numbers_in_any_usual_form_are_the_same_number(program: Program, written: str, meant: str) -> None:
    assert program.solve(lamp(failure_rate=written)).value("mean_up_time") == pytest.approx(1000, rel=1e-12)
    assert program.solve(lamp(failure_rate=meant)).value("mean_up_time") == pytest.approx(1000, rel=1e-12)


def test_an_exponent_and_an_underscore_make_numbers_and_not_text(program: Program) -> None:
    told = program.solve(LAMP, "--at", "1e4 h", "--at", "1_000 h")
    assert {each["at_hours"] for each in told.json["results"]} == {None, 100, 1000, 10000}


@pytest.mark.parametrize("written", ["010 h", "1:30", "1:30 h", "'1,5 h'", "no", "off", "true", "0x1F h", "1e h", "~"])
def test_what_can_be_read_in_two_ways_is_refused(program: Program, written: str) -> None:
    (line,) = program.refused(lamp(repair_time=written))
    assert "units.lamp.repair_time" in line


@pytest.mark.parametrize("name", ["no", "on", "off", "y", "1", "1e3", "010", "null", "true", "1:30"])
def test_names_keep_their_spelling(program: Program, name: str) -> None:
    told = program.solve(
        f"units: {{{name}: {{failure_rate: 1e-3 /h, repair_time: 10 h}}}}\nsystem: {name}\n"
        f"targets: [{{id: {name}, measure: mean_units_failed, of: {name}, at_most: 1}}]\n"
    )
    assert told.status == 0
    assert told.verdicts == {name: "met"}
    assert told.result("mean_units_failed", of=name)["value"] is not None


# --- attack 4: NaN, infinity, negative, null


@pytest.mark.parametrize("key", ["failure_rate", "repair_time", "start_failure"])
@pytest.mark.parametrize("written", [".nan", ".inf", "-.inf", "nan", "inf", "null", "''", "[]", "{}"])
def test_what_is_no_number_is_refused(program: Program, key: str, written: str) -> None:
    (line,) = program.refused(lamp(**{key: written}))
    assert f"units.lamp.{key}" in line


@pytest.mark.parametrize(
    ("key", "written"),
    [("failure_rate", "-1e-3 /h"), ("repair_time", "-10 h"), ("start_failure", "-1 %"), ("repair_stages", "-1")],
)
def test_what_is_negative_is_refused(program: Program, key: str, written: str) -> None:
    (line,) = program.refused(lamp(**{key: written}))
    assert f"units.lamp.{key}" in line


def test_a_difference_below_zero_is_refused(program: Program) -> None:
    spec = "parameters: {a: 1e-3 /h, b: 2e-3 /h}\n" + lamp(failure_rate="a - b")
    (line,) = program.refused(spec)
    assert "units.lamp.failure_rate" in line


# --- attack 5: a rate without unit of measure, FIT where per hour is meant


@pytest.mark.parametrize(
    ("key", "written"),
    [("failure_rate", "1e-3"), ("repair_time", "10"), ("failure_rate", "10 h"), ("repair_time", "1 /h")],
)
def test_a_bare_number_or_the_wrong_dimension_is_refused(program: Program, key: str, written: str) -> None:
    (line,) = program.refused(lamp(**{key: written}))
    assert f"units.lamp.{key}" in line


@pytest.mark.parametrize(
    "written",
    [
        "50 FIT",
        "5e-8 /h",
        "0.05 per million hours",
        "50 per billion hours",
        "0.000438 /y",
        "1.2e-6 /d",
        "0.5 % per 1e5 h",
    ],
)
def test_one_rate_in_many_units_is_one_rate(program: Program, written: str) -> None:
    assert program.solve(lamp(failure_rate=written)).value("mean_up_time") == pytest.approx(2e7, rel=1e-12)


def test_fit_is_not_taken_for_a_rate_per_hour(program: Program) -> None:
    assert program.solve(lamp(failure_rate="50 FIT")).value("mean_up_time") > 1e7
    assert program.solve(lamp(failure_rate="50 /h")).value("mean_up_time") < 1


# --- attack 6: a mean time between failures on a unit that is never repaired


@pytest.mark.parametrize("key", ["mtbf", "MTBF", "mean_time_between_failures"])
@pytest.mark.parametrize("repair", ["", "10 h"])
def test_a_time_between_failures_is_refused_with_the_key_that_says_what_is_meant(
    program: Program, key: str, repair: str
) -> None:
    (line,) = program.refused(lamp(failure_rate="", repair_time=repair, **{key: "500 h"}))
    assert "write `mean_time_to_failure`" in line


def test_a_mean_up_time_is_not_made_up_for_a_unit_that_is_never_repaired(program: Program) -> None:
    told = program.solve(lamp(repair_time=""))
    assert told.value("mean_time_to_first_failure") == pytest.approx(1000, rel=1e-12)
    assert told.value("mean_up_time") is None
    assert told.result("mean_up_time")["reason"]
    assert any("never repaired" in choice for choice in told.json["assumptions"])


# --- attack 10: c = 95


@pytest.mark.parametrize("key", ["coverage: 95", "switchover: {coverage: 95}", "coverage: [0.9, 95]"])
def test_a_coverage_of_ninety_five_is_refused_with_both_ways_to_write_it(program: Program, key: str) -> None:
    group = f"groups: {{g: {{members: [{{unit: lamp, count: 3}}], redundancy: hot_standby, {key}}}}}\n"
    (line,) = program.refused(LAMP.replace("system: lamp", group + "system: g"))
    assert "95 % or 0.95" in line


def test_a_coverage_in_per_cent_is_the_share(program: Program) -> None:
    def value(coverage: str) -> float:
        group = f"groups: {{g: {{members: [{{unit: lamp, count: 2}}], redundancy: active, coverage: {coverage}}}}}\n"
        return program.solve(LAMP.replace("system: lamp", group + "system: g")).value("unreliability")

    assert value("95 %") == value("0.95")


# --- attack 11: a parameter that nothing uses


def test_an_unused_parameter_is_noted_and_changes_nothing(program: Program) -> None:
    told = program.solve("parameters: {forgotten: 5 h, used: 10 h}\n" + lamp(repair_time="used"))
    plain = program.solve(lamp())
    assert told.status == 0
    assert [warning for warning in told.json["warnings"] if "forgotten" in warning]
    assert not [warning for warning in told.json["warnings"] if "used:" in warning.replace("unused:", "")]
    assert told.json["results"] == plain.json["results"]
    assert "forgotten" in program("check", program.file("parameters: {forgotten: 5 h}\n" + LAMP)).out


# --- attack 40, in part: large files, bombs, formulas


def test_ten_megabytes_are_refused(program: Program) -> None:
    program.folder.joinpath("plant.yaml").write_text(LAMP + "# " + "x" * 10_000_000 + "\n", encoding="utf-8")
    told = program("solve", "plant.yaml")
    assert (told.status, told.out) == (2, "")
    assert "4 MB" in told.err


def test_an_alias_bomb_is_refused(program: Program) -> None:
    rows = ["a0: &a0 [x, x, x, x, x, x, x, x, x, x]"]
    rows += [f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 10)}]" for n in range(1, 10)]
    (line, *_) = program.refused("notes:\n" + "".join(f"  {row}\n" for row in rows) + LAMP)
    assert "alias" in line


def test_depth_without_end_is_refused(program: Program) -> None:
    lines = program.refused("system: " + "{all_of: [" * 5000 + "lamp" + "]}" * 5000 + "\n")
    assert len(lines) == 1


def test_a_value_is_arithmetic_and_never_code(program: Program) -> None:
    for written in ("=1+1", "__import__('os').getpid() * 1 h", "${HOME}", "!!python/object:os.system x", "10 ** 9 h"):
        told = program.solve(lamp(repair_time=f'"{written}"' if not written.startswith("!") else written))
        assert (told.status, told.out) == (2, "")


def test_powers_beyond_reach_are_refused(program: Program) -> None:
    for written in ("1e999999999 h", "1e-999999999 h", "9" * 5000 + " h"):
        assert program.solve(lamp(repair_time=written)).status == 2
