"""How errors are laid out for people."""

from __future__ import annotations

from stackmill.documents.showing import in_order, report
from stackmill.errors import InputError, InputErrors, Place


def error(line: int, column: int = 1, excerpt: str = "", file: str = "f.yaml", what: str = "wrong") -> InputError:
    return InputError(what, cure="mend it", place=Place(file, line, column, excerpt))


def test_headline_line_and_caret() -> None:
    assert report(error(3, 7, "  key: value")) == ("f.yaml:3:7: error: wrong (mend it)\n      key: value\n          ^")


def test_files_in_the_order_they_were_met_then_lines() -> None:
    errors = [error(9, file="b"), error(2, file="a"), error(1, 5, file="b"), error(1, 2, file="b")]
    assert [str(e.place) for e in in_order(errors)] == ["b:1:2", "b:1:5", "b:9:1", "a:2:1"]


def test_the_same_complaint_is_made_once() -> None:
    assert len(in_order([error(1), InputErrors([error(1), error(2)])])) == 2


def test_at_most_twenty_then_how_many_more() -> None:
    lines = report([error(k) for k in range(1, 26)]).split("\n")
    assert len(lines) == 21
    assert lines[-1] == "and 5 more"
    twenty = report([error(k) for k in range(1, 21)])
    assert twenty.count("error:") == 20
    assert twenty.endswith("f.yaml:20:1: error: wrong (mend it)")


def test_the_caret_stands_under_wide_and_combining_characters() -> None:
    text = report(error(1, 5, "漢e\u0301: x"))
    _, excerpt, caret = text.split("\n")
    assert excerpt == "    漢e\u0301: x"
    assert caret == "    " + " " * 4 + "^"


def test_long_lines_are_cut_around_the_caret() -> None:
    text = report(error(1, 500, "x" * 499 + "!" + "y" * 500))
    _, excerpt, caret = text.split("\n")
    assert len(excerpt) <= 104
    assert excerpt[caret.index("^")] == "!"


def test_terminal_codes_in_a_file_stay_harmless() -> None:
    assert "\x1b" not in report(error(1, 1, "a\x1b[31m"))


def test_a_file_without_a_line_has_no_excerpt() -> None:
    assert report(InputError("wrong", place=Place("f.yaml"))) == "f.yaml: error: wrong"
