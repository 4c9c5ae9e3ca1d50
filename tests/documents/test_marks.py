# ruff: noqa: E501 - a message stands on one line, as it is printed
"""The YAML reader: every value keeps its place, and nothing a file says is taken on trust."""

from __future__ import annotations

import pytest

from stackmill.documents.marks import DEEPEST, MOST_BYTES, MOST_NODES, read_tree
from stackmill.errors import InputErrors

TEXT = """\
# a comment
title: 0.8 µm class
layers:
  - {name: oxide, thickness: 600 nm}
  - name: "metal 2"
    features: []
empty:
quoted: ''
"""


def headlines(source: str | bytes) -> list[str]:
    with pytest.raises(InputErrors) as refused:
        read_tree(source, "f.yaml")
    return [error.headline() for error in refused.value.errors]


def test_scalars_stay_text() -> None:
    text = "a: no\nb: 1:30\nc: 012\nd: 1e3\ne: ~\nf: null\ng: 2026-01-01\nh: 0x10"
    assert read_tree(text, "f").plain() == {
        "a": "no",
        "b": "1:30",
        "c": "012",
        "d": "1e3",
        "e": "~",
        "f": "null",
        "g": "2026-01-01",
        "h": "0x10",
    }


def test_plain_content() -> None:
    assert read_tree(TEXT, "f").plain() == {
        "title": "0.8 µm class",
        "layers": [{"name": "oxide", "thickness": "600 nm"}, {"name": "metal 2", "features": []}],
        "empty": None,
        "quoted": "",
    }


@pytest.mark.parametrize(
    ("path", "line", "column"),
    [
        ((), 2, 1),
        (("title",), 2, 8),
        (("layers", 0), 4, 5),
        (("layers", 0, "thickness"), 4, 30),
        (("layers", 1, "name"), 5, 11),
        (("layers", 1, "no such key"), 5, 5),
        (("layers", 7), 4, 3),
    ],
)
def test_places(path: tuple[str | int, ...], line: int, column: int) -> None:
    place = read_tree(TEXT, "f.yaml").place(path)
    assert (place.file, place.line, place.column) == ("f.yaml", line, column)
    assert place.excerpt == TEXT.split("\n")[line - 1]


def test_place_of_a_key() -> None:
    place = read_tree(TEXT, "f.yaml").key_place(("layers", 0, "thickness"))
    assert (place.line, place.column) == (4, 19)


@pytest.mark.parametrize("breaks", ["\r\n", "\r", "\n"])
def test_line_breaks_of_all_systems(breaks: str) -> None:
    tree = read_tree(TEXT.replace("\n", breaks).encode(), "f")
    assert tree.plain() == read_tree(TEXT, "f").plain()
    assert tree.place(("layers", 1, "name")).line == 5


def test_a_byte_order_mark_is_no_part_of_the_text() -> None:
    for source in (b"\xef\xbb\xbf" + TEXT.encode(), "\ufeff" + TEXT):
        tree = read_tree(source, "f")
        assert tree.plain() == read_tree(TEXT, "f").plain()
        assert tree.place(("title",)).column == 8


def test_columns_count_characters() -> None:
    assert read_tree("{a: 😀é, b: 2}", "f").place(("b",)).column == 12


@pytest.mark.parametrize(
    ("source", "expected"),
    [
        ("a:\n\tb: 1", "f.yaml:2:1: error: there is a tab here (use spaces)"),
        (b"a: \xff", "f.yaml:1:4: error: this file is not UTF-8 text: byte 0xFF here belongs to another encoding (save it as UTF-8)"),
        (b"a: b\x00", "f.yaml:1:5: error: there is a NUL byte here (is this a text file?)"),
        ("a: \x07", "f.yaml:1:4: error: there is an invisible character here, U+0007 (a control character) (remove it)"),
        ("a: b\u2029", "f.yaml:1:5: error: there is an invisible character here, U+2029 (paragraph separator) (remove it)"),
        ("a: 1\nb: 2\na: 3", "f.yaml:3:1: error: the key 'a' stands here for the second time (it is already in line 1; keep one)"),
        ("a: &x 1", "f.yaml:1:4: error: the anchor &x is not allowed (write the values out where they are needed)"),
        ("a: *x", "f.yaml:1:4: error: the alias *x is not allowed (write the values out here)"),
        ("a: !!int 1", "f.yaml:1:4: error: tags such as !!int are not used here (remove everything that begins with a !)"),
        ("a: 1\n---\nb: 2", "f.yaml:2:1: error: a second document begins here (keep one document in a file and remove the ---)"),
        ("? [a]\n: 1", "f.yaml:1:3: error: a key has to be a plain text (write 'key: value')"),
        ("a: [1, 2", "f.yaml:1:4: error: the list opened here with [ is not closed (add the missing ] or comma)"),
        ("a: {b: 1", "f.yaml:1:4: error: the group opened here with { is not closed (add the missing } or comma)"),
        ("a: 'b", "f.yaml:1:4: error: the quote opened here is not closed (add the missing quote)"),
        ("a: - b", "f.yaml:1:4: error: a list cannot begin on the line of its key (put the - on a line of its own, or use [ ])"),
        ("a: ]", "f.yaml:1:4: error: there is a bracket or comma here where a value belongs (remove it)"),
        ('a: "\\q"', "f.yaml:1:5: error: the \\ in this quoted text means nothing (use single quotes)"),
        ("a: `b`", "f.yaml:1:4: error: a text cannot begin with ` (put it in quotes)"),
        ("a: b\n  c", "f.yaml:1:4: error: this text runs on into the next line (check the indentation below it, or put the text in quotes)"),
        ("a:\n  b: 1\n c: 2", "f.yaml:3:2: error: this line is not indented like the ones it belongs to (begin keys of one group in the same column)"),
    ],
)  # fmt: skip
def test_refusals(source: str | bytes, expected: str) -> None:
    assert headlines(source) == [expected]


def test_several_complaints_at_once() -> None:
    assert len(headlines("a: &x 1\nb: *x\nb: 2\nc: !t 3")) == 4


def test_a_tab_in_a_comment_does_no_harm() -> None:
    assert read_tree("a: 1  #\tnote", "f").plain() == {"a": "1"}


def test_size_limit() -> None:
    fits = "a: " + "x" * (MOST_BYTES - 3)
    assert read_tree(fits, "f").plain()["a"].endswith("x")
    assert headlines(fits + "x") == [
        "f.yaml: error: this file has more than 1,000,000 bytes (is this the file you meant?)"
    ]


def test_depth_limit() -> None:
    assert read_tree("[" * DEEPEST + "]" * DEEPEST, "f").plain()
    assert headlines("[" * (DEEPEST + 1) + "]" * (DEEPEST + 1)) == [
        "f.yaml:1:51: error: this is nested more than 50 levels deep (check the brackets)"
    ]
    assert "nested more than 50 levels" in headlines("[" * 900_000)[0]
    assert "nested more than 50 levels" in headlines("- " * 400_000)[0]
    assert "nested more than 50 levels" in headlines("{a: " * 200_000)[0]


def test_count_limit() -> None:
    assert len(read_tree("[" + "a," * (MOST_NODES - 1) + "]", "f").plain()) == MOST_NODES - 1
    assert "more than 50,000 values" in headlines("[" + "a," * MOST_NODES + "]")[0]
