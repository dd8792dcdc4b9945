"""Reading YAML: what the strict reader refuses, and that it agrees with plain YAML on all the rest."""

import tempfile
from pathlib import Path
from typing import Any, Never

import pytest
import yaml
from hypothesis import given, settings
from hypothesis import strategies as st

from conetone.errors import SweepError
from conetone.sweep.reading import DEEPEST, LARGEST_FILE, read_yaml


def read(text: str | bytes) -> Any:
    content = text if isinstance(text, bytes) else text.encode("utf-8", "surrogatepass")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "some.yaml"
        path.write_bytes(content)
        return read_yaml(path)


def refusal(content: str | bytes) -> str:
    """What is said of a faulty content, nothing of a good one."""
    try:
        read(content)
    except SweepError as error:
        return str(error)
    return ""


def fault_of(path: Path) -> SweepError:
    with pytest.raises(SweepError) as caught:
        read_yaml(path)
    return caught.value


def test_a_missing_file(tmp_path: Path) -> None:
    error = fault_of(tmp_path / "none.yaml")
    assert str(error) == "the file: found no such file; allowed: a YAML file that exists; check the path"


def test_a_folder(tmp_path: Path) -> None:
    assert str(fault_of(tmp_path)) == "the file: found a folder; allowed: a YAML file"


def test_a_path_through_a_file(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("sweep: a\n")
    assert fault_of(tmp_path / "file" / "some.yaml").found == "Not a directory"


def test_a_link_to_itself(tmp_path: Path) -> None:
    (tmp_path / "loop.yaml").symlink_to("loop.yaml")
    assert fault_of(tmp_path / "loop.yaml").allowed == "a readable YAML file"


def test_a_file_that_may_not_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # root may read everything, so the refusal is played
    def refuse(*_: Any, **__: Any) -> Never:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "open", refuse)
    error = fault_of(tmp_path / "some.yaml")
    assert (error.found, error.allowed) == ("Permission denied", "a readable YAML file")


def test_the_longest_file_and_one_byte_more(tmp_path: Path) -> None:
    path = tmp_path / "long.yaml"
    path.write_text("sweep: a\n#" + "x" * (LARGEST_FILE - 10))
    assert path.stat().st_size == LARGEST_FILE
    assert read_yaml(path) == {"sweep": "a"}
    path.write_text(path.read_text() + "x")
    assert (fault_of(path).place, fault_of(path).allowed) == ("the file", f"at most {LARGEST_FILE:,} bytes")


def test_a_file_without_end() -> None:
    assert fault_of(Path("/dev/zero")).allowed == f"at most {LARGEST_FILE:,} bytes"


@pytest.mark.parametrize(
    ("content", "place", "found"),
    [
        (b"sweep: caf\xe9\n", "line 1", "0xe9"),
        (b"a: 1\nb: 2\n# \xff\n", "line 3", "0xff"),
        ("sweep: a\n".encode("utf-16"), "line 1", "0xff"),
        ("# 因果集".encode()[:-1], "line 1", "0xe9"),
    ],
)
def test_bytes_that_are_not_utf8(content: bytes, place: str, found: str) -> None:
    with pytest.raises(SweepError) as caught:
        read(content)
    assert caught.value.place == place
    assert f"a byte that is not UTF-8 ({found})" == caught.value.found


def test_nesting_to_the_limit_and_one_level_more() -> None:
    # the innermost value is a level of its own
    assert read("[" * (DEEPEST - 1) + "1" + "]" * (DEEPEST - 1)) == yaml.safe_load("[" * 19 + "1" + "]" * 19)
    with pytest.raises(SweepError, match=f"at most {DEEPEST} levels"):
        read("[" * DEEPEST + "1" + "]" * DEEPEST)


def test_aliases_that_would_expand_to_a_billion_entries() -> None:
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 10)}]" for i in range(1, 10)]
    with pytest.raises(SweepError, match="line 1: found an anchor"):
        read("\n".join(lines))


@pytest.mark.parametrize(
    ("text", "quiet"),
    [
        ("a: 0256", {"a": 0o256}),
        ("a: 0x1F", {"a": 31}),
        ("a: 0b11", {"a": 3}),
        ("a: 1:30", {"a": 90}),
        ("a: 1:30.5", {"a": 90.5}),
        ("a: 1\na: 2", {"a": 2}),
        ("{a: {b: 1, b: 2}}", {"a": {"b": 2}}),
        ("a: &x 1\nb: *x", {"a": 1, "b": 1}),
        ("<<: {a: 1}\nb: 2", {"a": 1, "b": 2}),
        ("a: !!str 1", {"a": "1"}),
        ("1: 2", {1: 2}),
        ("yes: 2", {True: 2}),
    ],
)
def test_what_plain_yaml_converts_merges_or_drops_in_silence_is_refused(text: str, quiet: Any) -> None:
    assert yaml.safe_load(text) == quiet
    with pytest.raises(SweepError, match=r"^line \d: found "):
        read(text)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("a: 1_000", {"a": 1000}),
        ("a: +5", {"a": 5}),
        ("a: -0", {"a": 0}),
        ("a: 1.5e-3", {"a": 0.0015}),
        ("a: 1e-3", {"a": "1e-3"}),
        ("a: .inf", {"a": float("inf")}),
        ("a: '0256'", {"a": "0256"}),
        ("a: ~", {"a": None}),
        ("'1': 2", {"1": 2}),
        ("a: |\n  two\n  lines\n", {"a": "two\nlines\n"}),
        ("", None),
        ("%YAML 1.1\n---\na: 1\n...\n", {"a": 1}),
    ],
)
def test_what_is_read_as_plain_yaml_reads_it(text: str, value: Any) -> None:
    assert read(text) == value == yaml.safe_load(text)


class _WithoutAliases(yaml.SafeDumper):
    """A dumper that writes a value again where the same object stands twice."""

    def ignore_aliases(self, data: Any) -> bool:
        return True


PRINTABLE = st.text(
    st.characters(codec="utf-8", exclude_categories=["Cs", "Cn", "Co", "Cc", "Zl", "Zp"]), max_size=20
)
VALUES = st.recursive(
    st.none() | st.booleans() | st.integers(-(10**20), 10**20) | st.floats(allow_nan=False) | PRINTABLE,
    lambda inner: st.lists(inner, max_size=5) | st.dictionaries(PRINTABLE, inner, max_size=5),
    max_leaves=15,
).filter(lambda value: _depth(value) <= DEEPEST)


def _depth(value: Any) -> int:
    inner = value.values() if isinstance(value, dict) else value if isinstance(value, list) else ()
    return 1 + max(map(_depth, inner), default=0)


@settings(max_examples=200, deadline=None)
@given(VALUES, st.booleans())
def test_what_yaml_writes_is_read_back(value: Any, flow: bool) -> None:
    text = yaml.dump(value, Dumper=_WithoutAliases, default_flow_style=flow, allow_unicode=True)
    assert read(text) == value == yaml.safe_load(text)


YAML_PIECES = st.sampled_from(
    ["a", "b", "1", "0", ":", ": ", ",", "[", "]", "{", "}", "- ", "? ", "\n", "\n  ", "\t", "&x ", "*x",
     "!!int ", "!t ", "<<", "=", "'", '"', "#", " #", "|\n", ">\n", "---\n", "...\n", "%YAML 1.1\n", "~",
     ".inf", "1e3", "0x", "2026-13-45", "1:30", "@", "`", "\\", '"\\ud800"', '"\\UFFFFFFFF"', '"\\x00"',
     "\x00", "\x85", "é", "😀", "\ufeff"]
)  # fmt: skip


@settings(max_examples=600, deadline=None)
@given(st.lists(YAML_PIECES, max_size=25).map("".join) | st.text(max_size=40) | st.binary(max_size=40))
def test_any_bytes_are_read_or_refused_in_one_printable_line(content: str | bytes) -> None:
    message = refusal(content)
    assert message.isprintable()
    assert len(message) < 500
