"""YAML, read strictly: UTF-8, one document, no repeated keys, no tags, a limited size."""

from pathlib import Path
from typing import Any

import yaml

from conetone.errors import SweepError

LARGEST_FILE = 1_000_000
ADVICE = "see config/README.md for every field"


class _StrictLoader(yaml.SafeLoader):
    """PyYAML's safe loader, which keeps the last of repeated keys, made to refuse them; and aliases too.

    Aliases are refused because a few lines of them can expand to gigabytes.
    """

    def compose_node(self, parent: yaml.Node | None, index: int) -> yaml.Node | None:
        if self.check_event(yaml.AliasEvent):
            event = self.peek_event()
            raise _at(event.start_mark, "an alias (*name)", "plain values")
        return super().compose_node(parent, index)

    def construct_mapping(self, node: yaml.MappingNode, deep: bool = False) -> dict[Any, Any]:
        seen = set()
        for key_node, _ in node.value:
            key = self.construct_object(key_node, deep=True)  # type: ignore[no-untyped-call]
            if not isinstance(key, str):
                raise _at(key_node.start_mark, f"the key {key}", "keys that are words")
            if key in seen:
                raise _at(
                    key_node.start_mark, f"the field {key} a second time", "each field once", "remove one"
                )
            seen.add(key)
        return super().construct_mapping(node, deep)


def read_yaml(path: Path) -> Any:
    """The values of a YAML file; raises SweepError for anything but one plain, readable document."""
    try:
        size = path.stat().st_size
        if size > LARGEST_FILE:
            raise SweepError("the file", f"{size:,} bytes", f"at most {LARGEST_FILE:,} bytes")
        text = path.read_text(encoding="utf-8")
    except UnicodeDecodeError as error:
        raise SweepError("the file", f"byte {error.start} that is not UTF-8", "a UTF-8 text file") from None
    except IsADirectoryError:
        raise SweepError("the file", "a folder", "a YAML file") from None
    except FileNotFoundError:
        raise SweepError("the file", "no such file", "a YAML file that exists", "check the path") from None
    except OSError as error:
        raise SweepError("the file", error.strerror or str(error), "a readable YAML file") from None
    try:
        return yaml.load(text, Loader=_StrictLoader)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        place = f"line {mark.line + 1}, column {mark.column + 1}" if mark else "the file"
        raise SweepError(place, f"no valid YAML ({error.problem})", "plain YAML", ADVICE) from None
    except (yaml.YAMLError, RecursionError, ValueError) as error:
        reason = "nesting too deep" if isinstance(error, RecursionError) else str(error).splitlines()[0]
        raise SweepError("the file", f"no valid YAML ({reason})", "plain YAML", ADVICE) from None


def _at(mark: yaml.Mark, found: str, allowed: str, advice: str = "") -> SweepError:
    return SweepError(f"line {mark.line + 1}", found, allowed, advice)
