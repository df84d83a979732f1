"""TOML files: where a key stands, also where the text tries to mislead."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.errors import InputError
from console.toml_file import TomlFile, is_whole, read_text

MISLEADING = '''\
title = """
seed = 1
"""
modules = [
    "a", # seed = 2
    "b",
]
# seed = 3
  "seed"   = 4
[other]
seed = 5
'''


def parsed(text: str) -> TomlFile:
    return TomlFile.parse(text, "x.toml")


def test_the_line_of_a_key_is_not_one_that_only_looks_like_it() -> None:
    assert parsed(MISLEADING).line_of("seed") == 9


@pytest.mark.parametrize(
    ("text", "key", "line"),
    [
        ("a = 1\nb = 2\n", "b", 2),
        ("\n\n\ta=1", "a", 3),
        ("a.b = 1", "a", 1),
        ("x = 1\r\n'a' = 2\r\n", "a", 2),
        ("x = 1\n[a]\ny = 1", "a", 2),
        ("x = 1\n[[ a ]]\ny = 1", "a", 2),
        ("ab = 1\nb = 1", "b", 2),
        ("a = 1", "b", None),
    ],
)
def test_line_of_key(text: str, key: str, line: int | None) -> None:
    assert parsed(text).line_of(key) == line


@given(st.lists(st.sampled_from(["a", "b", "c", "d-e", "f_g"]), unique=True, min_size=1))
def test_lines_of_keys_are_found_between_comments_and_empty_lines(keys: list[str]) -> None:
    lines = [line for key in keys for line in ("", f"# {key} = 0", f"{key} = [", "1,", "]")]
    file = parsed("\n".join(lines))
    assert [file.line_of(key) for key in keys] == [5 * count + 3 for count in range(len(keys))]


@pytest.mark.parametrize(
    ("text", "line"),
    [("a = 1\nb = \nc = 3\n", 2), ("a = 1\n\nb = 1\nb = 2\n", 4), ('a = 1\nb = """x\ny\n', 3)],
)
def test_what_is_not_toml_is_placed(text: str, line: int) -> None:
    with pytest.raises(InputError, match=rf"^x\.toml, line {line}: not TOML: "):
        parsed(text)


@pytest.mark.parametrize("text", ["a = " + "9" * 5000, "a = " + "[" * 100_000])
def test_what_a_parser_chokes_on_is_one_clear_line(text: str) -> None:
    with pytest.raises(InputError, match=r"^x\.toml") as caught:
        parsed(text)
    assert len(str(caught.value)) < 150


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        ('"no"', 'not "no"'),
        ("true", "not true"),
        ("-3", "not -3"),
        ("[1, 2]", "not a list of 2"),
        ("{b = 1}", "not a table"),
        ('"' + "y" * 200 + '"', "not a longer text"),
        ("1979-05-27", "not 1979-05-27"),
    ],
)
def test_what_stood_there_is_shown(value: str, shown: str) -> None:
    file = parsed(f"a = {value}")
    with pytest.raises(InputError, match=rf"^x\.toml, line 1: a: expected five, {shown}$"):
        file.whole("a", "five", 5, 5)


def test_numbers_and_their_bounds() -> None:
    file = parsed("a = 5\nb = 2.5\nc = inf\nd = nan\ne = true")
    assert file.whole("a", "five", 5, 5) == 5
    assert file.whole("z", "five", 5, 5, default=5) == 5
    assert file.number("a", "some", 0.0, 9.0) == 5.0
    assert file.number("b", "some", 0.0, 2.5) == 2.5
    for key in "cdez":
        with pytest.raises(InputError, match=rf"{key}: expected some"):
            file.number(key, "some", 0.0, 9.0)
    assert not is_whole(True, 0, 9)
    assert not is_whole(3.0, 0, 9)


def test_an_unknown_key_gets_a_near_miss_or_the_list() -> None:
    with pytest.raises(InputError, match=r"^x\.toml, line 2: sede: unknown key; .*'seed'\?$"):
        parsed("seed = 1\nsede = 2").only(["seed", "title"])
    with pytest.raises(
        InputError, match=r"^x\.toml, line 1: q: unknown key; there are seed, title$"
    ):
        parsed("q = 1").only(["seed", "title"])


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    missing, latin = tmp_path / "none.toml", tmp_path / "latin.toml"
    latin.write_bytes(b"a = 1\nb = 'K\xf6ln'\n")
    with pytest.raises(InputError, match=r"none\.toml: cannot be read: No such file"):
        read_text(missing)
    with pytest.raises(InputError, match="cannot be read"):
        read_text(tmp_path)
    with pytest.raises(InputError, match=r"latin\.toml, line 2: expected UTF-8"):
        read_text(latin)


def test_a_byte_order_mark_is_passed_over(tmp_path: Path) -> None:
    path = tmp_path / "marked.toml"
    path.write_bytes(b"\xef\xbb\xbfa = 1\n")
    assert parsed(read_text(path)).table == {"a": 1}
