"""YAML, read strictly: UTF-8, one document, no repeated keys, no tags, no aliases, a limited size."""

import re
from pathlib import Path
from typing import Any, Never

import yaml

from conetone.errors import SweepError

THE_FILE = "the file"
LARGEST_FILE = 100_000
DEEPEST = 20
# Longer than every number that a field allows; int() of thousands of digits is slow, then an error.
PLAIN_NUMBER = re.compile(r"[-+]?(0|[1-9][0-9_]{0,24})")
LONGEST_QUOTE = 60
ADVICE = "see config/README.md for every field"
# What the commonest complaints of the parser come from.
ADVICE_BY_PROBLEM = {
    "'\\t'": "indent with spaces, not tabs",
    "expected ':'": "put a space after every colon",
    "another document": "remove the line ---",
    "<block end>": "check the indentation",
    "<document start>": "check the indentation",
}


class _StrictLoader(yaml.SafeLoader):
    """PyYAML's safe loader, made to refuse what it would quietly convert, merge or drop.

    Left alone it keeps the last of repeated keys, and reads 0256 as octal, 1:30 as 90 and an unquoted
    2026-12-01 as a date. Aliases are refused because a few lines of them can expand to gigabytes.
    """

    _depth = 0

    def compose_node(self, parent: yaml.Node | None, index: int) -> yaml.Node | None:
        """One value of the document; aliases, anchors, tags and endless nesting are refused."""
        event = self.peek_event()  # type: ignore[no-untyped-call]
        found = ""
        if isinstance(event, yaml.AliasEvent):
            found = f"an alias (*{event.anchor})"
        elif event.anchor is not None:
            found = f"an anchor (&{event.anchor})"
        elif event.tag is not None:
            found = "the tag " + event.tag.replace("tag:yaml.org,2002:", "!!")
        if found:
            raise _at(event.start_mark, one_line(found), "plain values")
        if self._depth == DEEPEST:
            raise _at(event.start_mark, "values nested deeper", f"at most {DEEPEST} levels", ADVICE)
        self._depth += 1
        node = super().compose_node(parent, index)
        self._depth -= 1
        return node

    def construct_mapping(self, node: yaml.MappingNode, deep: bool = False) -> dict[Any, Any]:
        """A mapping whose keys are words, each once."""
        seen = set()
        for key_node, _ in node.value:
            if key_node.tag == "tag:yaml.org,2002:merge":
                raise _at(key_node.start_mark, "a merge key (<<)", "plain values")
            key = self.construct_object(key_node, deep=True)
            if not isinstance(key, str):
                found = (
                    one_line(str(key_node.value))
                    if isinstance(key_node, yaml.ScalarNode)
                    else "a list or mapping"
                )
                raise _at(key_node.start_mark, f"{found} as the name of a field", "names that are words")
            if key in seen:
                found = f"the field {one_line(key)} a second time"
                raise _at(key_node.start_mark, found, "each field once", "remove one")
            seen.add(key)
        return super().construct_mapping(node, deep)


def _plain_integer(loader: _StrictLoader, node: yaml.ScalarNode) -> int:
    if PLAIN_NUMBER.fullmatch(node.value):
        return int(node.value)
    allowed = "numbers in plain decimal digits, not too many, and no leading zero"
    raise _at(node.start_mark, f"the number {one_line(node.value)}", allowed)


def _plain_float(loader: _StrictLoader, node: yaml.ScalarNode) -> float:
    if ":" in node.value:
        raise _at(node.start_mark, f"the number {one_line(node.value)}", "numbers in plain decimal digits")
    return float(loader.construct_yaml_float(node))


def _no_date(loader: _StrictLoader, node: yaml.ScalarNode) -> Never:
    raise _at(
        node.start_mark, f"the date {one_line(node.value)}", "numbers and texts", "quote it to make it a text"
    )


for _tag, _construct in {"int": _plain_integer, "float": _plain_float, "timestamp": _no_date}.items():
    _StrictLoader.add_constructor(f"tag:yaml.org,2002:{_tag}", _construct)


def read_yaml(path: Path) -> Any:
    """The values of a YAML file; raises SweepError for anything but one plain, readable document."""
    text = _text_of(path)
    try:
        return yaml.load(text, Loader=_StrictLoader)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        place = f"line {mark.line + 1}, column {mark.column + 1}" if mark else THE_FILE
        problem = str(error.problem)
        advice = next((text for part, text in ADVICE_BY_PROBLEM.items() if part in problem), ADVICE)
        reason = ", ".join(part for part in (error.context, error.problem) if part)
        raise SweepError(place, f"no valid YAML ({reason})", "plain YAML", advice) from None
    except yaml.YAMLError as error:
        reason = str(error).splitlines()[0]
        raise SweepError(THE_FILE, f"no valid YAML ({reason})", "plain YAML") from None
    except (ValueError, OverflowError):
        # chr() of the parser
        raise SweepError(THE_FILE, r"an escape \U beyond Unicode", "plain YAML") from None


def _text_of(path: Path) -> str:
    try:
        with path.open("rb") as file:
            # a device or a pipe has no size to ask for, and may have no end
            content = file.read(LARGEST_FILE + 1)
    except IsADirectoryError:
        raise SweepError(THE_FILE, "a folder", "a YAML file") from None
    except FileNotFoundError:
        raise SweepError(THE_FILE, "no such file", "a YAML file that exists", "check the path") from None
    except OSError as error:
        raise SweepError(THE_FILE, error.strerror or str(error), "a readable YAML file") from None
    if len(content) > LARGEST_FILE:
        raise SweepError(THE_FILE, "a longer file", f"at most {LARGEST_FILE:,} bytes")
    try:
        return content.decode("utf-8")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        found = f"a byte that is not UTF-8 (0x{content[error.start]:02x})"
        raise SweepError(f"line {line}", found, "a UTF-8 text file", "save it as UTF-8") from None


def _at(mark: yaml.Mark, found: str, allowed: str, advice: str = "") -> SweepError:
    return SweepError(f"line {mark.line + 1}", found, allowed, advice)


def shortened(text: str) -> str:
    """The beginning of a text."""
    return text if len(text) <= LONGEST_QUOTE else text[: LONGEST_QUOTE - 3] + "…"


def one_line(text: str) -> str:
    """A text shortened, and quoted with escapes unless it is plain."""
    shown = shortened(text)
    return shown if shown and shown.isprintable() else repr(shown)
