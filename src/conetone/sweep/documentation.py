"""Write config/README.md and workflow/schemas/sweep.schema.json from the models of the sweep file.

    python -m conetone.sweep.documentation [--check]

Works in a clone; `--check` writes nothing, names what is out of date and exits with 1.
"""

import argparse
import inspect
import json
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import yaml
from pydantic import BaseModel
from pydantic.fields import FieldInfo

from conetone.errors import SweepError
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.fields import (
    ALLOWED_KEY,
    DEFAULT_KEY,
    ENSEMBLE_FIELDS,
    INNER_FIELDS,
    SweepFields,
    allowed_in_words,
    by_file_name,
    default_in_words,
)

CLONE = Path(__file__).parents[3]
COMMAND = "python -m conetone.sweep.documentation"

REQUIRED_FIELDS = """\
sweep: first-look
root_seed: 20261201
ensembles:
  - {ensemble: minkowski-diamond, dimension: [2, 3, 4, 5]}
  - {ensemble: minkowski-box, dimension: 2}
  - {ensemble: kleitman-rothschild}
sizes: [256, 362, 512, 724, 1024]
replicates: 24
operators:
  - {matrix: causal, part: [antisymmetric, symmetric]}
"""

README = """\
# The sweep file

<!-- Written by `{command}`; do not edit. -->

A sweep is one study in one YAML file: which orders are drawn, how large and how many, which spectra are
taken of them, and how the spectra become exponents. `conetone expand SWEEP.yaml` shows what a file amounts
to before anything runs, `conetone run SWEEP.yaml` computes it.

## A complete example

```yaml
{example}```

One ensemble with its parameters and one operator make a *series*, which ends in one exponent: the example
has {choices} × {operators} of them. At each size a series has one *point*, with `replicates` orders.

## Fields

{fields}
{sections}
## How the file is read

- Where a list is allowed, a single value stands for a list of one.
- Every field stands once, unknown fields are refused, and nothing is converted: `256.0` and `"256"` are no
  whole numbers. YAML takes `1e-3` for a text; write `1.0e-3`.
- It is plain YAML in UTF-8, one document: no anchors, aliases or tags, no numbers such as `0256`, `0x1F`
  or `1:30`, no dates without quotes.
- A window end `c * n^b` is a rank, with n the number of elements; `n^0.5` is short for `1 * n^0.5`.
- Every size must fit into the memory of this machine.

Nothing runs before the whole file is right. A message says where, what was found and what is allowed; lists
are counted from 0, so that `ensembles[1]` is the second entry, and the first fault in the file is shown:

```text
{messages}
```

An editor that knows JSON Schema checks a file while you write, if its first line is

```yaml
# yaml-language-server: $schema=../workflow/schemas/sweep.schema.json
```

## Where the results go

Into `results/<sweep>/`, or with `conetone run SWEEP.yaml --results DIR` into `DIR/<sweep>/`. The folder is no
field of the sweep. With plain Snakemake it is a configuration value beside the fields, named `results`:

```sh
snakemake --configfile config/first-look.yaml --cores 2 --config results=DIR
```
"""


def schema() -> dict[str, Any]:
    """The JSON Schema (draft 2020-12) of a sweep file: structure, types and ranges of single fields."""
    head = {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": "conetone sweep"}
    tidied = _tidied(SweepFields.model_json_schema(mode="validation"))
    return {**head, "description": tidied.pop("description"), "type": tidied.pop("type"), **tidied}


def _tidied(node: Any) -> Any:
    """The schema with what is allowed in the descriptions, where editors show it.

    Private keywords go, and titles, which pydantic makes up from the names of fields and classes.
    """
    if isinstance(node, list):
        return [_tidied(inner) for inner in node]
    if not isinstance(node, dict):
        return node
    spare = {ALLOWED_KEY, DEFAULT_KEY, "discriminator", "title"}
    spare |= {"default"} if DEFAULT_KEY in node else set()
    tidy = {key: _tidied(inner) for key, inner in node.items() if key not in spare}
    if isinstance(default := tidy.get("default"), dict):
        tidy["default"] = {key: inner for key, inner in default.items() if inner is not None}
    if ALLOWED_KEY in node:
        tidy["description"] = f"{node['description']}; allowed: {node[ALLOWED_KEY]}"
    return tidy


def example() -> str:
    """A complete sweep file: the required fields, then every optional one with its default."""
    lines = ["", "# optional; these are the defaults"]
    for name, field in SweepFields.model_fields.items():
        if field.is_required():
            continue
        default = _default(field)
        if isinstance(default, dict) and len(default) > 1:
            lines += [f"{name}:", *(f"  {key}: {_yaml(value)}" for key, value in default.items())]
        else:
            lines.append(f"{name}: {_yaml(default)}")
    return REQUIRED_FIELDS + "\n".join(lines) + "\n"


def readme() -> str:
    """The text of config/README.md."""
    sweep = resolve_sweep(yaml.safe_load(example()))
    return README.format(
        command=COMMAND,
        example=example(),
        choices=len(sweep.choices),
        operators=len(sweep.operators),
        fields=_field_table(by_file_name(SweepFields)),
        sections="\n".join([_ensembles(), *(_section(name) for name in INNER_FIELDS)]),
        messages="\n".join(_messages()),
    )


def _ensembles() -> str:
    rows = []
    for name, ensemble in ENSEMBLES.items():
        parameters = {
            key: field for key, field in by_file_name(ENSEMBLE_FIELDS[name]).items() if key != "ensemble"
        }
        shown = [
            f"`{key}`: {field.description} ({allowed_in_words(field)})" for key, field in parameters.items()
        ]
        rows.append([f"`{name}`", ensemble.meaning, "; ".join(shown) or "none", ensemble.source])
    table = _table(["`ensemble`", "Meaning", "Parameters, all required", "Source"], rows)
    return f"### `ensembles`\n\n{table}"


def _section(name: str) -> str:
    fields = INNER_FIELDS[name]
    return f"### `{name}`\n\n{inspect.getdoc(fields)}\n\n{_field_table(by_file_name(fields))}"


def _field_table(fields: Mapping[str, FieldInfo]) -> str:
    rows = []
    for name, field in fields.items():
        nested = name in INNER_FIELDS or name == "ensembles"
        shown = f"[`{name}`](#{name})" if nested else f"`{name}`"
        default = "required" if field.is_required() else f"`{_yaml(_default(field))}`"
        default = default_in_words(field) or default
        if name in INNER_FIELDS and not field.is_required():
            default = "see there"
        rows.append([shown, field.description or "", allowed_in_words(field), default])
    return _table(["Field", "Meaning", "Allowed", "Default"], rows)


def _table(head: list[str], rows: list[list[str]]) -> str:
    lines = [head, ["---"] * len(head), *([cell.replace("|", "\\|") for cell in row] for row in rows)]
    return "".join(f"| {' | '.join(line)} |\n" for line in lines)


def _default(field: FieldInfo) -> Any:
    default = field.default
    # what depends on another field has no default to write down
    return default.model_dump(by_alias=True, exclude_none=True) if isinstance(default, BaseModel) else default


def _yaml(value: Any) -> str:
    """A value on one line, as one would write it."""
    text = yaml.safe_dump(value, default_flow_style=True, sort_keys=False, allow_unicode=True, width=1000)
    return text.removesuffix("...\n").strip()


def _messages() -> list[str]:
    """What is said of the example with one fault each."""
    faults = {
        "dimension: 2}": "dimension: 9}",
        "replicates: 24": "replicate: 24",
        "724, 1024]": "724, 724]",
    }
    return [_message(example().replace(right, wrong)) for right, wrong in faults.items()]


def _message(text: str) -> str:
    try:
        resolve_sweep(yaml.safe_load(text))
    except SweepError as error:
        return str(error)
    raise AssertionError(f"no fault in {text}")


def documents() -> dict[Path, str]:
    """Both files, relative to the clone, with the text they should have."""
    return {
        Path("config/README.md"): readme(),
        Path("workflow/schemas/sweep.schema.json"): json.dumps(schema(), indent=2, ensure_ascii=False) + "\n",
    }


def main(arguments: Sequence[str] | None = None, clone: Path = CLONE) -> int:
    """Write what is out of date, or only name it; the exit code is 1 if `--check` found something."""
    parser = argparse.ArgumentParser(prog=COMMAND, description="Write the documentation of the sweep file.")
    parser.add_argument("--check", action="store_true", help="write nothing; exit with 1 if out of date")
    check = parser.parse_args(arguments).check
    stale = {path: text for path, text in documents().items() if _text_at(clone / path) != text}
    for path, text in stale.items():
        if check:
            print(f"{path} is out of date; run `{COMMAND}`", file=sys.stderr)
            continue
        (clone / path).parent.mkdir(parents=True, exist_ok=True)
        (clone / path).write_text(text, encoding="utf-8")
        print(f"wrote {path}")
    return 1 if check and stale else 0


def _text_at(path: Path) -> str | None:
    return path.read_text(encoding="utf-8") if path.exists() else None


if __name__ == "__main__":
    sys.exit(main())
