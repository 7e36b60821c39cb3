"""YAML to plain data with places; what is refused, and that nothing can exhaust memory or the stack."""

import contextlib
import math
import time

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from yieldsim.config import compose, tree
from yieldsim.config.compose import Mark
from yieldsim.errors import InputError


def problems_of(text):
    with pytest.raises(InputError) as caught:
        tree.parse(text, "s.yaml")
    return caught.value.problems


def test_scalars_follow_the_core_schema_of_yaml_12():
    # YAML 1.2.2, section 10.3.2, with its own example values
    words, numbers = (
        "null, Null, ~, true, FALSE, yes, no, 'true'",
        "0, 0o7, 0x3A, -19, 0., -.0, .5, +12e03, -2E+05, 1e-3",
    )
    text = f"[{words}, {numbers}, 12:30, 2001-01-01]"
    assert tree.parse(text, "s").data == [
        None, None, None, True, False, "yes", "no", "true", 0, 7, 58, -19, 0.0, -0.0, 0.5, 12e3, -2e5, 1e-3, "12:30",
        "2001-01-01",
    ]  # fmt: skip
    special = tree.parse("[.inf, -.Inf, .nan]", "s").data
    assert special[:2] == [math.inf, -math.inf]
    assert math.isnan(special[2])


def test_every_key_and_value_has_its_place():
    document = tree.parse("a: 1\nb:\n  - c: {d: 2}\n", "s")
    assert document.data == {"a": 1, "b": [{"c": {"d": 2}}]}
    assert document.mark(("b", 0, "c", "d")) == Mark(3, 12)
    assert document.mark(("b", 0, "c", "d"), of_key=True) == Mark(3, 9)
    assert document.mark(("b", 0, "c", "missing")) == Mark(3, 5)  # the nearest thing above, by its key


def test_aliases_are_written_out():
    assert tree.parse("a: &x {b: 1}\nc: *x", "s").data == {"a": {"b": 1}, "c": {"b": 1}}


@pytest.mark.parametrize(
    ("text", "line", "found"),
    [
        ("a: 1\na: 2", 2, "key `a` again (first in line 1)"),
        ("z: {a: 1, a: 2}", 1, "key `a` again"),
        ("a: 1\nb: !!python/object:os.system x", 2, "tag"),
        ("? [1]\n: 2", 1, "a list as a key"),
        ("a: &x {b: 1}\nc: {<<: *x}", 2, "merge key"),
        ("a: &x [*x]", 1, "alias *x"),
        ("a: 1\n---\nb: 2", 2, "a second document"),
        ("a: [1, 2\nb: 3", 2, "expected ',' or ']'"),
        ("a: 'x", 1, "quoted scalar"),
        ("a:\n\t- b", 2, "cannot start any token"),
        ("a\0b", 1, "a control character"),
        ("[" * 50 + "]" * 50, 1, "more than 12 levels"),
    ],
)
def test_what_is_not_plain_data_is_refused_with_its_line(text, line, found):
    problem = problems_of(text)[0]
    assert problem.file == "s.yaml"
    assert problem.line == line
    assert found in problem.found


def test_several_slips_are_told_at_once():
    lines = [problem.line for problem in problems_of("a: 1\na: 2\nb: !x 1\nc: *y\n")]
    assert lines == [2, 3, 4]


def test_the_place_is_marked_under_the_line():
    problem = problems_of("a: 1\nb: {c: 1, c: 2}")[0]
    shown, caret = problem.excerpt.splitlines()
    assert shown.endswith("b: {c: 1, c: 2}")
    assert shown[caret.index("^")] == "c"
    assert caret.index("^") == shown.rindex("c: 2")


def test_the_place_of_a_syntax_slip_is_marked_too():
    _, caret = problems_of("ab: [1, 2\nabc: 3")[0].excerpt.splitlines()
    assert caret == "       |    ^"  # the colon: where a comma or bracket was due


def test_a_long_line_is_cut_around_the_place():
    line = "x" * 5000
    shown, caret = compose.excerpt([f"{line}HERE{line}"], Mark(1, 5001)).splitlines()
    assert len(shown) < 120
    assert shown[caret.index("^") :].startswith("HERE")


def test_wide_characters_before_the_place_move_the_caret():
    _, caret = compose.excerpt(["漢字: x"], Mark(1, 5)).splitlines()
    assert caret == "       |       ^"  # two characters of two columns, a colon and a blank before the x


def test_terminal_control_does_not_reach_the_message():
    shown, _ = compose.excerpt(["a: \x1b[31mred"], Mark(1, 1)).splitlines()
    assert "\x1b" not in shown


@pytest.mark.parametrize(
    "text",
    [
        "a: &a [x,x,x,x,x,x,x,x,x]\n"
        + "\n".join(f"{chr(98 + i)}: &{chr(98 + i)} [{','.join(['*' + chr(97 + i)] * 9)}]" for i in range(9)),
        "a0: &a0 [x]\n" + "\n".join(f"a{i + 1}: &a{i + 1} [*a{i}]" for i in range(3000)),
        "[" * 100_000,
        "{a: " * 50_000,
    ],
    ids=["alias bomb", "chain of aliases", "nested lists", "nested mappings"],
)
def test_hostile_text_is_refused_in_bounded_time(text):
    start = time.process_time()
    assert problems_of(text)
    assert time.process_time() - start < 20  # seconds; they take less than one: a guard against explosion, not a speed


def test_too_many_values(monkeypatch):
    monkeypatch.setattr(compose, "MAX_NODES", 100)
    assert "more than 100" in problems_of("[" + "1," * 200 + "]")[0].found


def test_long_whole_numbers_do_not_break_python():
    assert tree.parse("9" * 5000, "s").data == math.inf


@given(st.text(max_size=300))
@settings(deadline=None)
def test_any_text_is_data_or_refused(text):
    with contextlib.suppress(InputError):  # anything else fails the test
        assert tree.parse(text, "s").file == "s"


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(InputError, match="no such file"):
        tree.read(tmp_path / "x.yaml")


def test_a_folder_is_not_a_study(tmp_path):
    with pytest.raises(InputError, match="not a file"):
        tree.read(tmp_path)


def test_a_file_too_large(tmp_path):
    file = tmp_path / "x.yaml"
    file.write_bytes(b"#" * (tree.MAX_BYTES + 1))
    with pytest.raises(InputError, match="more than 1 MB"):
        tree.read(file)


def test_bytes_that_are_not_text(tmp_path):
    file = tmp_path / "x.yaml"
    file.write_bytes(b"a: 1\nb: \xff\xfe")
    with pytest.raises(InputError, match=r"x\.yaml:2: found bytes that are not UTF-8"):
        tree.read(file)


def test_a_mark_at_the_start_of_the_file_is_no_text(tmp_path):
    file = tmp_path / "x.yaml"
    file.write_bytes(b"\xef\xbb\xbfa: 1")
    assert tree.read(file).data == {"a": 1}


def test_key_paths_are_spelt_as_people_write_them():
    assert tree.spell(("sites", 0, "mounting", "tilt_deg")) == "sites[0].mounting.tilt_deg"
    assert tree.spell(("mounting", "south roof", "kind")) == "mounting['south roof'].kind"
